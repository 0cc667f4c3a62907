"""The one command before anything lands: format, lint, types, contracts, tests.

`python -m tests.check` runs all of it but the further tier; `--fix` repairs what a tool can;
`--tests` runs the tests alone; `--further` runs the slow tests alone; `--all` runs both.
Tests marked `long` run by hand: `python -m pytest -m long`.
"""

from __future__ import annotations

import argparse
import os
import subprocess
import sys
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
FAST = "not slow and not long"


def main() -> int:
    """Run the steps asked for; the first failing one ends the command."""
    parser = argparse.ArgumentParser(prog="python -m tests.check", description=__doc__)
    for flag in ("fix", "tests", "further", "all"):
        parser.add_argument(f"--{flag}", action="store_true")
    asked = parser.parse_args()
    steps: list[list[str]] = []
    if asked.fix:
        steps += [["ruff", "format", "."], ["ruff", "check", "--fix", "."]]
    if not (asked.tests or asked.further):
        steps += [
            ["ruff", "format", "--check", "."],
            ["ruff", "check", "."],
            ["mypy"],
            ["importlinter.cli", "lint-imports"],
        ]
    if not asked.further:
        steps.append(["pytest", "-n", "2", "-m", FAST])
    if asked.further or asked.all:
        steps.append(["pytest", "-n", "2", "-m", "slow"])
    environment = {**os.environ, "OMP_NUM_THREADS": "1", "OPENBLAS_NUM_THREADS": "1"}
    for step in steps:
        print("+", " ".join(step), flush=True)
        if step[0] == "importlinter.cli":
            command = [str(Path(sys.executable).parent / "lint-imports"), "--no-cache"]
        else:
            command = [sys.executable, "-m", *step]
        ended = subprocess.run(command, cwd=ROOT, env=environment, check=False)
        if ended.returncode != 0:
            return ended.returncode
    return 0


if __name__ == "__main__":
    sys.exit(main())
