"""Lays the invented site out in a folder: site file, plant database, settings; truth apart."""

from __future__ import annotations

import shutil
from pathlib import Path

from recon.declare.site_file import read_site
from recon.demo.simulate import simulate
from recon.demo.write_plant import write_plant
from recon.demo.write_truth import write_truth
from recon.errors import ConfigError


def config_folder() -> Path:
    """Folder of the project's examples: inside an installed package, else the checkout's."""
    package = Path(__file__).resolve().parents[1]
    installed = package / "_data" / "config"
    return installed if installed.is_dir() else package.parent / "config"


def free_folder(wanted: Path | None) -> Path:
    """
    Give the folder a demo goes to: the one wanted, else the first free of demo, demo-2, ...

    Raises
    ------
    ConfigError
        The one wanted holds something already; nothing is ever written over.
    """
    if wanted is not None:
        if wanted.exists() and any(wanted.iterdir()):
            raise ConfigError(f"{wanted} is not empty. Choose another folder; nothing was written.")
        return wanted
    names = (Path("demo" if n == 1 else f"demo-{n}") for n in range(1, 1000))
    return next(path for path in names if not path.exists())


def lay_out(
    folder: Path,
    *,
    months: int,
    interval: int,
    seed: int,
    faults: str,
    plant_url: str | None,
    book_url: str | None,
) -> str:
    """
    Simulate the site and write everything a service needs into a folder.

    Returns
    -------
    str
        What was made, in one sentence.

    Raises
    ------
    ConfigError
        An argument cannot be.
    """
    source = config_folder() / "demo" / "site.toml"
    try:
        simulation = simulate(
            read_site(source).site, months=months, interval=interval, seed=seed, faults=faults
        )
        folder.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(source, folder / "site.toml")
        write_plant(simulation, plant_url or f"sqlite:///{folder / 'plant.db'}")
        write_truth(simulation, folder / "truth.db")
    except ValueError as error:
        raise ConfigError(f"demo: {error}") from error
    except OSError as error:
        raise ConfigError(f"{folder}: cannot be written ({error.strerror}).") from error
    (folder / "recon.toml").write_text(
        "# Settings of the invented site; RECON_<KEY> overrides a key.\n"
        'site = "site.toml"\n'
        f'plant_url = "{plant_url or "sqlite:///plant.db"}"\n'
        f'book_url = "{book_url or "sqlite:///book.db"}"\n',
        encoding="utf-8",
    )
    readings = sum(len(series.at) for series in simulation.series)
    return (
        f"{len(simulation.truth.grid.days)} plant days of an invented copper site: {readings:,} "
        f"readings, {len(simulation.records):,} documents, {len(simulation.faults)} faults planted"
    )
