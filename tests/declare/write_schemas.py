"""Write the JSON Schemas of config/ anew: `python -m tests.declare.write_schemas`."""

from __future__ import annotations

from pathlib import Path

from recon.declare.schema import schemas

CONFIG = Path(__file__).resolve().parents[2] / "config"

if __name__ == "__main__":
    for name, text in schemas().items():
        (CONFIG / name).write_text(text, encoding="utf-8")
