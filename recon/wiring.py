"""Joins rooms: which engine, which readers, which stores a command uses."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.solve.choose import FirstAccepted, SmallOnly
from recon.solve.convex import Convex
from recon.solve.sparse_direct import SparseDirect

if TYPE_CHECKING:
    from recon.reconcile.solver import Engine

ENGINES = ("direct", "cvxpy")


def engine_named(name: str) -> Engine:
    """Give the engine a person asked for; both are checked before they are believed."""
    if name == "cvxpy":
        return FirstAccepted([Convex()])
    return FirstAccepted([SparseDirect(), SmallOnly(), Convex()])
