"""Joins rooms: which engine, which readers, which stores a command uses."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.solve.choose import FirstAccepted
from recon.solve.convex import Convex
from recon.solve.standard import standard_engine

if TYPE_CHECKING:
    from pathlib import Path

    from recon.declare.site import Site
    from recon.plant.joined import JoinedPlant
    from recon.reconcile.solver import Engine

ENGINES = ("direct", "cvxpy")


def engine_named(name: str) -> Engine:
    """Give the engine a person asked for; both are checked before they are believed."""
    if name == "cvxpy":
        return FirstAccepted([Convex()])
    return standard_engine()


def plant_of(site: Site, folder: Path, url: str | None) -> JoinedPlant:
    """
    Join the plant's sources that a site declares; nothing is asked yet.

    Parameters
    ----------
    site : Site
    folder : Path
        Of the site file. SQL is looked for in its folder ``sql``, in itself, then among the
        project's examples; sheets lie in it.
    url : str or None
        Address of the plant's database.

    Raises
    ------
    ConfigError
        The address or an SQL file is wrong.
    """
    from recon.db.migrate import sql_folder
    from recon.plant.joined import open_plant

    examples = sql_folder()
    places = (folder / "sql", folder, examples, examples / "queries")
    return open_plant(site, url=url, folder=folder, queries=places)
