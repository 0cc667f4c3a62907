"""Makes the invented site's plant database and, beside it, the truth.

`python -m recon.demo --out DIR` writes plant.db and truth.db.
"""

from __future__ import annotations

import argparse
import sys
from pathlib import Path
from tempfile import TemporaryDirectory

from sqlalchemy.exc import SQLAlchemyError

from recon.declare.site_file import read_site
from recon.demo.faults import FAULTS
from recon.demo.simulate import simulate
from recon.demo.write_plant import write_plant
from recon.demo.write_truth import write_truth
from recon.errors import ReconError


def main(arguments: list[str] | None = None) -> int:
    """Simulate and write; 0 done, 2 an argument or file is wrong."""
    parser = argparse.ArgumentParser(prog="python -m recon.demo", description=__doc__)
    parser.add_argument("--out", type=Path, required=True, help="folder for plant.db and truth.db")
    parser.add_argument("--site", type=Path, default=Path("config/demo/site.toml"))
    parser.add_argument("--months", type=int, default=2)
    parser.add_argument("--interval", type=int, default=5, help="minutes between readings")
    parser.add_argument("--seed", type=int, default=1)
    parser.add_argument(
        "--faults", default="on", help=f"on, off, or names: {', '.join(f.name for f in FAULTS)}"
    )
    parser.add_argument("--plant", default=None, help="database URL instead of plant.db")
    asked = parser.parse_args(arguments)
    try:
        made = _make(asked)
    except (ReconError, ValueError, OSError) as error:
        sys.stderr.write(f"{error}\n")
        return 2
    except SQLAlchemyError as error:
        said = str(getattr(error, "orig", None) or error).strip().splitlines()[0]
        sys.stderr.write(
            f"{asked.plant}: cannot be written: {said}. An empty database is expected, with an "
            "account that may create tables there; nothing was written.\n"
        )
        return 2
    sys.stdout.write(made)
    return 0


def _make(asked: argparse.Namespace) -> str:
    plant, truth = asked.out / "plant.db", asked.out / "truth.db"
    there = [str(p) for p in (plant, truth) if p.exists()]
    if there:
        raise FileExistsError(f"{' and '.join(there)} exist already; choose another folder.")
    simulation = simulate(
        read_site(asked.site).site,
        months=asked.months,
        interval=asked.interval,
        seed=asked.seed,
        faults=asked.faults,
    )
    asked.out.mkdir(parents=True, exist_ok=True)
    with TemporaryDirectory(dir=asked.out) as folder:  # a run cut short leaves no half a file
        whole = Path(folder)
        write_truth(simulation, whole / "truth.db")
        write_plant(simulation, asked.plant or f"sqlite:///{whole / 'plant.db'}")
        for path in (plant, truth):
            if (whole / path.name).exists():
                (whole / path.name).rename(path)
    readings = sum(len(s.at) for s in simulation.series)
    return (
        f"{len(simulation.truth.grid.days)} plant days, {readings:,} readings, "
        f"{len(simulation.records):,} papers, {len(simulation.faults)} faults planted: "
        f"{asked.plant or plant}; truth: {truth}\n"
    )


if __name__ == "__main__":
    sys.exit(main())
