"""Which engine answers: the direct one where accepted, else cvxpy, else a refusal in words."""

from __future__ import annotations

from typing import TYPE_CHECKING

from recon.errors import ContradictionError, NotAcceptedError
from recon.reconcile.accept import check

if TYPE_CHECKING:
    from collections.abc import Sequence

    from recon.reconcile.linearise import Local
    from recon.reconcile.solver import Engine, Sensitivities, Solution
    from recon.reconcile.state import State


class FirstAccepted:
    """
    Engine that asks several engines in turn and believes none of them unchecked.

    Parameters
    ----------
    engines : sequence of Engine
        In order of preference; the first one's sensitivities are used.
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
        """Factorise with the preferred engine."""
        return self.engines[0].sensitivities(local)
