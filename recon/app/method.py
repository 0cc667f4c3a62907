"""How a result was obtained: versions, solver, kernel and threads; recorded, never an identity."""

from __future__ import annotations

import platform
import sys
from importlib.metadata import version
from typing import TYPE_CHECKING

from threadpoolctl import threadpool_info

import recon

if TYPE_CHECKING:
    from recon.reconcile.answer import Answer

LIBRARIES = ("numpy", "scipy", "cvxpy", "clarabel", "qdldl", "tzdata")
THREADS = 1
"""Threads of the linear algebra during a fit: the same digits whatever the machine's load."""


def method_record(answer: Answer) -> tuple[tuple[str, str], ...]:
    """Say how an answer was obtained, by name, sorted."""
    record = {
        "recon": recon.__version__,
        "python": platform.python_version(),
        "platform": f"{sys.platform} {platform.machine()}",
        "engine": answer.solution.engine,
        "iterations": str(answer.solution.iterations),
        "balance residual": repr(answer.acceptance.balance_residual),
        "optimality residual": repr(answer.acceptance.optimality_residual),
        "threads": str(THREADS),
        "kernel": _kernel(),
    } | {name: version(name) for name in LIBRARIES}
    return tuple(sorted(record.items()))


def _kernel() -> str:
    """The processor kernels that the linear algebra libraries chose, each once."""
    found = {
        f"{pool.get('internal_api', '?')} {pool.get('version', '?')} {pool.get('architecture', '')}"
        for pool in threadpool_info()
    }
    return ", ".join(sorted(name.strip() for name in found)) or "unknown"
