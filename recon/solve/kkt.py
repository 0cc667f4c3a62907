"""The optimality system of one local problem, factorised sparsely and refined.

A little is added to the diagonal so that the factors exist in any order and whatever the data leave
open; every answer is then refined against the system without it, so that nothing of it remains.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
import qdldl
from scipy import sparse
from scipy.sparse.linalg import LinearOperator, gmres

from recon.errors import NotAcceptedError

if TYPE_CHECKING:
    from numpy.typing import NDArray

    Vector = NDArray[np.float64]

WEIGHT = 1e-7
"""Added to the curvature of every scaled unknown."""
GIVE = 1e-9
"""Taken from the diagonal of every equality."""
HARDER = (1.0, 10.0, 100.0, 1000.0)
"""Factors tried on both when the factors do not exist in floating point."""
HEAVY = 3e3
"""A standardised data row steeper than this, per typical size, is treated as a soft equality."""
REFINE = 40
ROUNDS, LOOSE_ROUNDS, SAME = 8, 3, 1e-7
"""Many columns are refined so often at most, or until a round changes them by no more; each round
leaves a fraction of what the one before changed."""
STRICT = 1e3
"""How much more an open equality weighs than a slope, while refining."""
SLOW, KRYLOV = 1e-7, 12
"""Where refinement rests above the first, a Krylov search of so many directions ends it."""
RESTS = 0.5
"""Refinement ends when a round lowers what is open by less than this factor, twice."""


class Symbolic:
    """Remembers the last factors, so that a system of the same pattern reuses their order."""

    def __init__(self) -> None:
        self._solver: qdldl.Solver | None = None
        self._pattern: tuple[NDArray[np.int32], NDArray[np.int32]] | None = None

    def forget(self) -> None:
        """Begin the next factors anew."""
        self._solver, self._pattern = None, None

    def factorise(self, matrix: sparse.csc_matrix) -> qdldl.Solver:
        """
        Factorise a symmetric quasi-definite matrix.

        Raises
        ------
        RuntimeError
            The factors do not exist in floating point.
        """
        same = self._pattern is not None and (
            np.array_equal(matrix.indptr, self._pattern[0])
            and np.array_equal(matrix.indices, self._pattern[1])
        )
        if same and self._solver is not None:
            self._solver.update(matrix)
        else:
            self._solver = None
            self._solver = qdldl.Solver(matrix)
            self._pattern = (matrix.indptr, matrix.indices)
        return self._solver


def _sound(solver: qdldl.Solver, rows: int) -> bool:
    """Whether factors give finite answers: pivots may vanish without a word."""
    return bool(np.isfinite(np.asarray(solver.solve(np.ones(rows)))).all())


@dataclass(frozen=True, kw_only=True)
class Kkt:
    """
    Factors of ``[[light' light, firm'], [firm, -soft]]``, with a little on the diagonal.

    Data rows steeper than ``HEAVY`` would drown the others in ``data' data``; scaled to length one
    they stand among the equalities instead, with the softness that is theirs.

    Attributes
    ----------
    light : csr_array
        Data rows that are not heavy, shape (m - k, N).
    firm : csr_array
        Equalities, then scaled heavy rows, shape (p + k, N).
    soft : ndarray
        Zero for equalities, squared scale for heavy rows, shape (p + k,).
    heavy : ndarray
        Which data rows are heavy, shape (m,).
    solver : qdldl.Solver
    weight, give : float
        What was added to and taken from the diagonal.
    """

    light: sparse.csr_array
    light_t: sparse.csr_array
    firm: sparse.csr_array
    firm_t: sparse.csr_array
    soft: Vector
    heavy: NDArray[np.bool_]
    solver: qdldl.Solver
    weight: float
    give: float

    @classmethod
    def of(
        cls,
        data: sparse.csr_array,
        equal: sparse.csr_array,
        symbolic: Symbolic | None = None,
        *,
        penalty: sparse.csr_array | None = None,
    ) -> Kkt:
        """
        Factorise; ``penalty`` rows join the data and are never heavy.

        Raises
        ------
        NotAcceptedError
            No factors exist, however much is put on the diagonal.
        """
        steep = np.sqrt(np.asarray(data.multiply(data).sum(axis=1)).ravel())
        heavy = steep > HEAVY
        light, firm, soft = data, equal, np.zeros(equal.shape[0])
        if heavy.any():
            tau = 1 / steep[heavy]
            light = sparse.csr_array(data[~heavy])
            firm = sparse.csr_array(sparse.vstack([equal, sparse.diags_array(tau) @ data[heavy]]))
            soft = np.concatenate([soft, tau**2])
        if penalty is not None:
            light = sparse.csr_array(sparse.vstack([light, penalty]))
        light_t, firm_t = sparse.csr_array(light.T), sparse.csr_array(firm.T)
        curvature = light_t @ light
        symbolic = symbolic or Symbolic()
        for factor in HARDER:
            weight, give = WEIGHT * factor, GIVE * factor
            matrix = sparse.block_array(
                [
                    [curvature + weight * sparse.eye_array(data.shape[1]), firm_t],
                    [firm, -sparse.diags_array(soft + give)],
                ],
                format="csc",
            )
            matrix.sort_indices()
            try:
                solver = symbolic.factorise(sparse.csc_matrix(matrix))
            except RuntimeError:
                continue
            if not _sound(solver, matrix.shape[0]):
                symbolic.forget()
                continue
            return cls(
                light=light,
                light_t=light_t,
                firm=firm,
                firm_t=firm_t,
                soft=soft,
                heavy=heavy,
                solver=solver,
                weight=weight,
                give=give,
            )
        raise NotAcceptedError(["sparse direct: the optimality system has no factors."])

    @property
    def wide(self) -> int:
        """Number of unknowns N."""
        return int(self.light.shape[1])

    def step(self, misfit: Vector, gap: Vector) -> tuple[Vector, Vector]:
        """
        Minimise ``|data @ d - misfit|^2`` subject to ``equal @ d = gap``.

        Returns
        -------
        move, force : ndarray
            Shapes (N,) and (p,), with ``data'(misfit - data @ d) + equal' @ force = 0``.
        """
        wide = self.wide
        aim = np.concatenate([gap, np.sqrt(self.soft[len(gap) :]) * misfit[self.heavy]])
        pull = misfit[~self.heavy]
        d, v = np.zeros(wide), np.zeros(len(aim))
        best, best_open, stalled = (d, v), np.inf, 0
        for _ in range(REFINE):
            top = self.light_t @ (pull - self.light @ d) - self.firm_t @ v
            low = aim - self.firm @ d + self.soft * v
            left = max(
                float(np.abs(top).max(initial=0.0)), STRICT * float(np.abs(low).max(initial=0.0))
            )
            stalled = stalled + 1 if left > RESTS * best_open else 0
            if left < best_open:
                best, best_open = (d, v), left
            if stalled > 1 or left == 0.0:
                break
            change = self.solver.solve(np.concatenate([top, low]))
            d, v = d + change[:wide], v + change[wide:]
        if not np.isfinite(best_open) or not (best[0].any() or best[1].any() or best_open == 0.0):
            raise NotAcceptedError(["sparse direct: refinement of the factors gains nothing."])
        if best_open > SLOW:
            best = self._hastened(best, np.concatenate([self.light_t @ pull, aim]), best_open)
        return best[0], -best[1][: len(gap)]

    def _hastened(
        self, found: tuple[Vector, Vector], right: Vector, left: float
    ) -> tuple[Vector, Vector]:
        """
        Take away at once what plain refinement removes too slowly; keep the better answer.

        A bound that holds beside a steep reading of the same ratio makes two rows nearly parallel;
        refinement then gains a hundredth a round, a Krylov search over the same factors all of it.
        """
        wide, n = self.wide, len(right)

        def system(z: Vector) -> Vector:
            d, v = z[:wide], z[wide:]
            top = self.light_t @ (self.light @ d) + self.firm_t @ v
            return np.concatenate([top, self.firm @ d - self.soft * v])

        now = np.concatenate(found)
        change, _ = gmres(
            LinearOperator((n, n), matvec=system, dtype=np.float64),
            right - system(now),
            M=LinearOperator((n, n), matvec=self.solver.solve, dtype=np.float64),
            rtol=1e-8,
            atol=0.0,
            restart=KRYLOV,
            maxiter=1,
        )
        after = now + change
        open_rows = np.abs(right - system(after))
        reached = max(
            float(open_rows[:wide].max(initial=0.0)),
            STRICT * float(open_rows[wide:].max(initial=0.0)),
        )
        return (after[:wide], after[wide:]) if reached < left else found

    def columns(
        self, top: Vector, gap: Vector | None = None, *, loose: NDArray[np.bool_] | None = None
    ) -> Vector:
        """
        Solve for many right sides at once, refined.

        Parameters
        ----------
        top : ndarray
            Slopes, shape (N, k).
        gap : ndarray, optional
            Right sides of the equalities, shape (p, k).
        loose : ndarray, optional
            Columns with a share that neither data nor equalities see, shape (k,). They have no
            limit; all of them are refined equally often, so that what they do not share cancels in
            combinations that are determined.

        Returns
        -------
        ndarray
            Moves and negative forces of equalities, then of heavy rows; shape (N + p + h, k).
        """
        wide = self.wide
        right = np.zeros((wide + len(self.soft), top.shape[1]))
        right[:wide] = top
        if gap is not None:
            right[wide : wide + len(gap)] = gap
        answer = self._solve(right)
        going = np.arange(right.shape[1])
        for passes in range(1, ROUNDS + 1):
            change = self._solve(right[:, going] - self._apply(answer[:, going]))
            answer[:, going] += change
            most = np.abs(answer[:, going]).max(axis=0, initial=0.0)
            open_ = np.abs(change).max(axis=0, initial=0.0) > SAME * most
            if loose is not None:
                open_ = np.where(loose[going], passes < LOOSE_ROUNDS, open_)
            going = going[open_]
            if not len(going):
                break
        return answer

    def unseen(self, count: int, rounds: int, seed: int) -> Vector:
        """
        Project random directions onto what neither data nor equalities see.

        Parameters
        ----------
        count, rounds, seed : int
            Number of directions, rounds of inverse iteration, and the seed they are drawn from.

        Returns
        -------
        ndarray
            Shape (N, count); a unit gradient with a share s in the unseen directions meets each
            of them with a normal product of standard deviation s.
        """
        wide = self.wide
        z = np.random.default_rng(seed).standard_normal((wide, count))
        for _ in range(rounds):
            right = np.zeros((wide + len(self.soft), count))
            right[:wide] = self.weight * z
            answer = self._solve(right)
            open_ = right - self._apply(answer)
            open_[:wide] -= self.weight * answer[:wide]
            open_[wide:] += self.give * answer[wide:]
            z = (answer + self._solve(open_))[:wide]
        return z

    def _apply(self, answer: Vector) -> Vector:
        d, v = answer[: self.wide], answer[self.wide :]
        top = self.light_t @ (self.light @ d) + self.firm_t @ v
        return np.concatenate([top, self.firm @ d - self.soft[:, None] * v])

    def _solve(self, right: Vector) -> Vector:
        answer = np.empty(right.shape, order="F")
        for j in range(right.shape[1]):
            answer[:, j] = self.solver.solve(right[:, j])
        return answer
