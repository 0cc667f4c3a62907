"""Every finding code of this room is listed for people, and every listed one exists."""

from __future__ import annotations

import re
from pathlib import Path

ROOT = Path(__file__).resolve().parents[2]


def test_finding_codes_and_their_list_agree() -> None:
    source = "\n".join(p.read_text(encoding="utf-8") for p in (ROOT / "recon/ingest").glob("*.py"))
    called = re.findall(r'(?:\.find|\.say)\(\s*f?"([a-z{}-]+)"', source)
    called += re.findall(r'"([a-z-]+)" if words else "([a-z-]+)"', source)[0]
    codes = {c for c in called if "{" not in c} | {"bad-quality", "uncertain-quality"}
    text = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    listed = text.partition("Finding codes:")[2].partition("\n\n")[0]
    assert set(re.findall(r"`([a-z-]+)`", listed)) == codes
