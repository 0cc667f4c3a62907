"""Which bounds hold the answer: the set of active ones is changed until forces and slacks agree."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from recon.errors import NotAcceptedError

if TYPE_CHECKING:
    from collections.abc import Callable

    from numpy.typing import NDArray

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Step

    Vector = NDArray[np.float64]
    Mask = NDArray[np.bool_]

MOST_SETS = 200
PUSH = -1e-7
"""A bound that would pull, not push, by more than this is let go."""
SLACK = -1e-9
"""A bound broken by more than this, as a share of typical size, is taken up."""


def settle_bounds(
    local: Local,
    with_active: Callable[[Mask], Step],
    *,
    start: Mask,
    engine: str,
    most: int = MOST_SETS,
) -> tuple[Step, Mask]:
    """
    Change the set of active bounds until it holds what it must and nothing else.

    Parameters
    ----------
    local : Local
    with_active : callable
        Solves with the given bounds as equalities, shape (q,).
    start : ndarray
        First guess of the active bounds, shape (q,).
    engine : str
        Name for messages.
    most : int
        Sets tried.

    Returns
    -------
    step : Step
    active : ndarray
        Shape (q,).

    Raises
    ------
    NotAcceptedError
        The sets repeat.
    """
    active = start
    seen: set[bytes] = set()
    for _ in range(most):
        step = with_active(active)
        slack = np.asarray(local.bound @ step.move) - local.room
        wanted = (active & (step.bound_force > PUSH)) | (~active & (slack < SLACK))
        if np.array_equal(wanted, active):
            return step, active
        key = wanted.tobytes()
        if key in seen:
            wanted = _one_change(active, wanted, step.bound_force, slack)
            key = wanted.tobytes()
            if key in seen:
                break
        seen.add(key)
        active = wanted
    raise NotAcceptedError([f"{engine}: the sets of active bounds repeat."])


def _one_change(active: Mask, wanted: Mask, force: Vector, slack: Vector) -> Mask:
    """Change only the bound that is most wrong, so that a cycle is left."""
    wrong = np.where(active != wanted, np.where(active, -force, -slack), -np.inf)
    single = active.copy()
    worst = int(np.argmax(wrong))
    single[worst] = not single[worst]
    return single
