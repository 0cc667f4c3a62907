"""Long figures as commands: `python -m tests.bench NAME [options]`.

NAME is a module of this folder with ``main(arguments) -> exit status``; `--help` lists them.
"""

from __future__ import annotations

import importlib
import sys
from pathlib import Path

FOLDER = Path(__file__).resolve().parent


def names() -> list[str]:
    """Benches by name: modules that have a ``main``."""
    return sorted(
        path.stem
        for path in FOLDER.glob("*.py")
        if not path.stem.startswith("_") and "\ndef main(" in path.read_text(encoding="utf-8")
    )


def main(arguments: list[str]) -> int:
    """Run the bench named first."""
    if not arguments or arguments[0] not in names():
        print(f"usage: python -m tests.bench NAME [options]\nNAME: {', '.join(names())}")
        return 0 if arguments[:1] in ([], ["--help"], ["-h"]) else 2
    status: int = importlib.import_module(f"tests.bench.{arguments[0]}").main(arguments[1:])
    return status


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
