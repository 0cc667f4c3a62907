"""Which sets of faults explain the evidence best: a beam search over spike-and-slab models.

Under a set S of faults with plausible sizes s the whitened residual is ``z ~ N(0, I + H_S H_S')``
with ``H = G diag(s)``. With ``K = H'H + I`` and ``c = H'z``::

    log p(S | z) = const + c_S' K_SS^-1 c_S / 2 - log det K_SS / 2 + sum of log prior odds

Only ``N = G'z`` and ``M = G'G`` are needed, so evidence gathered over days serves as well.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.suspects.candidates import Candidate, Column

    Vector = NDArray[np.float64]

WIDTH = 20
"""Sets of each size that are grown further."""
VISITED = 48
"""Sets of each size that are kept as alternatives."""
DEPTH = 8
FAR = 10.0
"""The search ends when the best set of a size lies so many nats below the best of all."""


@dataclass(frozen=True, kw_only=True)
class Choices:
    """
    What a set may be made of: each candidate at each of its two plausible sizes.

    Attributes
    ----------
    column : ndarray
        Direction of each copy, shape (p,).
    scale : ndarray
        Plausible amplitude of each copy, shape (p,).
    single : ndarray
        Copies that are a choice by themselves, shape (s,).
    blocks : tuple of ndarray
        Copies that enter together, one entry a choice.
    owner : ndarray
        Candidate of each choice, shape (s + b,): singles, then blocks.
    """

    column: NDArray[np.intp]
    scale: Vector
    single: NDArray[np.intp]
    blocks: tuple[NDArray[np.intp], ...]
    owner: NDArray[np.intp]

    def copies(self, choice: int) -> NDArray[np.intp]:
        """Copies that a choice brings in."""
        if choice < len(self.single):
            return self.single[choice : choice + 1]
        return self.blocks[choice - len(self.single)]

    @cached_property
    def directions(self) -> list[tuple[int, ...]]:
        """Directions each choice is free in."""
        return [
            tuple(self.column[self.copies(choice)].tolist()) for choice in range(len(self.owner))
        ]

    @cached_property
    def overlap(self) -> NDArray[np.bool_]:
        """Which choices share a direction, shape (s + b, s + b)."""
        touched = np.zeros((int(self.owner.max(initial=-1)) + 1, len(self.scale) // 2))
        for owner, columns in zip(self.owner.tolist(), self.directions, strict=True):
            touched[owner, list(columns)] = 1.0
        share = touched @ touched.T > 0
        return np.asarray(share[self.owner][:, self.owner])


def choices_of(candidates: Sequence[Candidate], columns: Sequence[Column]) -> Choices:
    """Lay out every candidate at both of its plausible sizes."""
    count = len(columns)
    slabs = np.array([c.slabs for c in columns]).reshape(-1, 2)
    singles: list[tuple[int, int]] = []
    blocks: list[tuple[int, NDArray[np.intp]]] = []
    for owner, candidate in enumerate(candidates):
        rows = candidate.columns
        for size in (0, count):
            if len(rows) == 1:
                singles.append((owner, rows[0] + size))
            else:
                blocks.append((owner, np.array(rows, dtype=np.intp) + size))
    return Choices(
        column=np.concatenate([np.arange(count), np.arange(count)]).astype(np.intp),
        scale=np.concatenate([slabs[:, 0], slabs[:, 1]]),
        single=np.array([copy for _, copy in singles], dtype=np.intp),
        blocks=tuple(rows for _, rows in blocks),
        owner=np.array([o for o, _ in singles] + [o for o, _ in blocks], dtype=np.intp),
    )


@dataclass(frozen=True, kw_only=True)
class Evidence:
    """
    All a search needs to know of the data.

    Attributes
    ----------
    N : ndarray
        ``G'z``, shape (C,).
    M : ndarray
        ``G'G``, shape (C, C).
    """

    N: Vector
    M: Vector


def search(
    gram: Gram,
    log_odds: Vector,
    *,
    width: int = WIDTH,
    visited: int = VISITED,
    depth: int = DEPTH,
) -> dict[tuple[int, ...], float]:
    """
    Find the best sets of choices.

    Parameters
    ----------
    gram : Gram
    log_odds : ndarray
        Prior log odds of each choice, shape (s + b,).
    width, visited, depth : int

    Returns
    -------
    dict
        Log posterior weight of every set that was kept, relative to the empty set, whose weight
        is 0; sets are rising tuples of choices.
    """
    beam = _Beam.start(gram)
    found: dict[tuple[int, ...], float] = {(): 0.0}
    best = 0.0
    for _ in range(depth):
        totals = beam.score[:, None] + _gains(beam, gram) + log_odds
        totals[_taken(beam, gram)] = -np.inf
        children = _best(totals, beam.sets, visited)
        if not children:
            break
        found.update({members: score for members, score, _, _ in children})
        top = children[0][1]
        best = max(best, top)
        if top < best - FAR:
            break
        beam = beam.grow(children[:width], gram)
    return found


def replacements(gram: Gram, others: Sequence[int]) -> Vector:
    """Rise of the log evidence by each choice, given that others are free already; (s + b,)."""
    beam = _Beam.start(gram)
    if others:
        rows = np.concatenate([gram.choices.copies(choice) for choice in others])
        root = np.linalg.cholesky(gram.K[rows][:, rows])
        used = np.linalg.solve(root, gram.K[rows])
        beam = _Beam(
            sets=[tuple(others)],
            score=beam.score,
            c=beam.c - np.linalg.solve(root, gram.c[rows]) @ used,
            diagonal=beam.diagonal - np.sum(used**2, axis=0),
            used=used[None, :, :],
        )
    return np.asarray(_gains(beam, gram)[0])


class Gram:
    """
    ``K = H'H + I`` and ``c = H'z``, K's diagonal blocks, and which choices exclude one another.

    Parameters
    ----------
    evidence : Evidence
    choices : Choices
    label : ndarray
        Class of each choice, shape (s + b,): a set holds at most one of each class, and no two
        that share a direction.
    """

    def __init__(self, evidence: Evidence, choices: Choices, label: NDArray[np.intp]) -> None:
        h, col = choices.scale, choices.column
        self.choices = choices
        self.c = h * evidence.N[col]
        self.K = evidence.M[col][:, col] * h[:, None] * h[None, :]
        self.K[np.diag_indices_from(self.K)] += 1.0
        self.diagonal = np.diag(self.K).copy()
        widths = [len(b) for b in choices.blocks]
        self.padded = np.zeros((len(widths), max(widths, default=0)), dtype=np.intp)
        self.real = np.zeros(self.padded.shape, dtype=np.bool_)
        for row, block in enumerate(choices.blocks):
            self.padded[row, : len(block)] = block
            self.real[row, : len(block)] = True
        inner = self.K[self.padded[:, :, None], self.padded[:, None, :]]
        self.inner = np.where(self.real[:, :, None] & self.real[:, None, :], inner, 0.0)
        self.clash = choices.overlap | (label[:, None] == label[None, :])


@dataclass(frozen=True, kw_only=True)
class _Beam:
    """
    Sets being grown with what is left of ``c`` and of the diagonal of ``K`` given each.

    ``used`` are the rows by which Schur complements were lowered, shape (sets, steps, p).
    """

    sets: list[tuple[int, ...]]
    score: Vector
    c: Vector
    diagonal: Vector
    used: Vector

    @classmethod
    def start(cls, gram: Gram) -> _Beam:
        return cls(
            sets=[()],
            score=np.zeros(1),
            c=gram.c[None, :],
            diagonal=gram.diagonal[None, :],
            used=np.zeros((1, 0, len(gram.c))),
        )

    def grow(self, children: list[tuple[tuple[int, ...], float, int, int]], gram: Gram) -> _Beam:
        parents = np.array([parent for _, _, parent, _ in children], dtype=np.intp)
        copies = [gram.choices.copies(choice) for _, _, _, choice in children]
        c, diagonal, used = self.c[parents], self.diagonal[parents], self.used[parents]
        for step in range(max(len(rows) for rows in copies)):
            live = np.array([step < len(rows) for rows in copies], dtype=np.bool_)
            j = np.array([rows[min(step, len(rows) - 1)] for rows in copies], dtype=np.intp)
            at = np.arange(len(j))
            root = np.sqrt(np.where(live, diagonal[at, j], 1.0))
            lowered = gram.K[j] - np.einsum("al,alp->ap", used[at, :, j], used)
            u = np.where(live[:, None], lowered / root[:, None], 0.0)
            c = c - u * (np.where(live, c[at, j], 0.0) / root)[:, None]
            diagonal = diagonal - u**2
            used = np.concatenate([used, u[:, None, :]], axis=1)
        return _Beam(
            sets=[members for members, _, _, _ in children],
            score=np.array([score for _, score, _, _ in children]),
            c=c,
            diagonal=diagonal,
            used=used,
        )


def _taken(beam: _Beam, gram: Gram) -> NDArray[np.bool_]:
    """Which choices each set excludes, shape (sets, s + b)."""
    if not beam.sets[0]:
        return np.zeros((1, gram.clash.shape[0]), dtype=np.bool_)
    return np.asarray(gram.clash[np.array(beam.sets, dtype=np.intp)].any(axis=1))


def _gains(beam: _Beam, gram: Gram) -> Vector:
    """Rise of the log evidence by each choice given each set, shape (sets, s + b)."""
    choices = gram.choices
    c, d = beam.c[:, choices.single], np.maximum(beam.diagonal[:, choices.single], 1.0)
    single = c**2 / (2 * d) - np.log(d) / 2
    if not choices.blocks:
        return np.asarray(single)
    rows = gram.padded
    free = ~_taken(beam, gram)[:, len(choices.single) :]
    real = gram.real[None, :, :] & free[:, :, None]
    left = np.broadcast_to(gram.inner, (len(beam.sets), *gram.inner.shape))
    if beam.used.shape[1]:
        taken = beam.used[:, :, rows]
        left = left - np.einsum("slbi,slbj->sbij", taken, taken)
    left = np.where(real[..., :, None] & real[..., None, :], left, np.eye(rows.shape[1]))
    inside = beam.c[:, rows] * real
    root = np.linalg.cholesky(left)
    solved = np.linalg.solve(root, inside[..., None])[..., 0]
    half = np.log(np.diagonal(root, axis1=-2, axis2=-1)).sum(axis=-1)
    return np.hstack([single, np.sum(solved**2, axis=-1) / 2 - half])


def _best(
    totals: Vector, sets: list[tuple[int, ...]], count: int
) -> list[tuple[tuple[int, ...], float, int, int]]:
    """The best distinct children: members, score, parent, choice added."""
    flat = totals.ravel()
    wide = totals.shape[1]
    depth = len(sets[0]) + 1
    take = min(count * depth, flat.size)
    order = np.argpartition(-flat, take - 1)[:take]
    order = order[np.lexsort((order, -flat[order]))]
    result: dict[tuple[int, ...], tuple[tuple[int, ...], float, int, int]] = {}
    scores, found = flat[order].tolist(), order.tolist()
    for score, where in zip(scores, found, strict=True):
        if score == -np.inf or len(result) == count:
            break
        parent, choice = divmod(where, wide)
        members = tuple(sorted((*sets[parent], choice)))
        if members not in result:
            result[members] = (members, score, parent, choice)
    return list(result.values())
