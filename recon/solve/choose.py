"""Which engine answers: the direct one where accepted, else cvxpy, else a refusal in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.errors import ContradictionError, NotAcceptedError
from recon.reconcile.accept import check
from recon.solve.closed_form import ClosedForm
from recon.solve.sparse_direct import SparseDirect

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Engine, Sensitivities, Solution
    from recon.reconcile.state import State


DENSE = 400
"""Up to this many unknowns ranks are read off the singular values of dense factors."""


class SmallOnly:
    """The dense closed form, for problems small enough for it."""

    name = ClosedForm.name

    def solve(self, state: State) -> Solution:
        """Find the optimum; see ``recon.reconcile.solver.Engine``."""
        if len(state.columns) + state.draws > DENSE:
            raise NotAcceptedError([f"{self.name}: too large for dense factors."])
        return ClosedForm().solve(state)

    def sensitivities(self, local: Local) -> Sensitivities:
        """Factorise the problem around a point."""
        return sensitivities(local)


def sensitivities(local: Local) -> Sensitivities:
    """Factorise the problem around a point: densely where it is small, sparsely where large."""
    engine = ClosedForm() if len(local.scale) <= DENSE else SparseDirect()
    return engine.sensitivities(local)


class FirstAccepted:
    """
    Engine that asks several engines in turn and believes none of them unchecked.

    Parameters
    ----------
    engines : sequence of Engine
        In order of preference.
    """

    def __init__(self, engines: Sequence[Engine]) -> None:
        self.engines = tuple(engines)
        self.name = ", else ".join(engine.name for engine in self.engines)

    def solve(self, state: State) -> Solution:
        """Give the first answer that passes the checks; see ``Engine``."""
        reasons: list[str] = []
        contradiction: ContradictionError | None = None
        for engine in self.engines:
            try:
                solution = engine.solve(state)
            except ContradictionError as error:
                contradiction = contradiction or error
                continue
            except NotAcceptedError as error:
                reasons.extend(error.reasons)
                continue
            found = check(solution)
            if not found.reasons:
                return solution
            reasons.extend(found.reasons)
        if contradiction is not None:
            raise contradiction
        raise NotAcceptedError(reasons)

    def sensitivities(self, local: Local) -> Sensitivities:
        """Factorise directly, whichever engine solved it."""
        return sensitivities(local)
