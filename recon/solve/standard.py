"""The engine that every accounting run uses: direct first, then what answers if it is refused."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.solve.choose import FirstAccepted, SmallOnly
from recon.solve.convex import Convex
from recon.solve.sparse_direct import SparseDirect

if TYPE_CHECKING:
    from recon.reconcile.solver import Engine


def standard_engine() -> Engine:
    """Give sparse factors first, dense ones for small problems, then the convex solver."""
    return FirstAccepted([SparseDirect(), SmallOnly(), Convex()])
