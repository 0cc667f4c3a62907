"""A site written down reads back as itself."""

from __future__ import annotations

from recon.declare.site_file import site_from_bytes
from tests.fakes.five_nodes import five_node_site
from tests.fakes.site_toml import toml_of


def test_the_five_node_site_reads_back_from_its_file() -> None:
    site = five_node_site()
    assert site_from_bytes(toml_of(site).encode(), "site.toml").site == site
