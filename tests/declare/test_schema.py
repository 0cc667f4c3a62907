"""The JSON Schemas for editors say what the readers take."""

from __future__ import annotations

import json

import pytest

from recon.declare.schema import schemas
from tests.declare.write_schemas import CONFIG


@pytest.mark.parametrize("name", sorted(schemas()))
def test_the_committed_schema_is_current(name: str) -> None:
    committed = (CONFIG / name).read_text(encoding="utf-8")
    assert committed == schemas()[name], "run: python -m tests.declare.write_schemas"


def test_the_schema_uses_the_files_words_for_a_streams_ends() -> None:
    stream = json.loads(schemas()["site.schema.json"])["$defs"]["SiteStream"]["properties"]
    assert {"from", "to"} <= set(stream)
    assert "source" not in stream


def test_the_schema_explains_the_keys() -> None:
    instrument = json.loads(schemas()["site.schema.json"])["$defs"]["Instrument"]["properties"]
    assert instrument["tag"]["description"].startswith("Exactly as in the plant")
