"""From weighted sets of faults to one explanation: who is blamed, with whom each is confused."""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from recon.suspects.beam import Choices, Evidence, Gram, choices_of, replacements, search
from recon.suspects.signatures import NEAR

if TYPE_CHECKING:
    from collections.abc import Sequence

    from numpy.typing import NDArray

    from recon.suspects.candidates import Candidate, Column

    Vector = NDArray[np.float64]

GROUP = 0.9
"""A suspect group holds the fault with at least this probability, if there is one there."""
APART = 2.0
"""Near signatures count as told apart when the evidence separates them by more than this."""
SLACK = 2.0
"""A freed value breaks a bound only if it does so by so many of its standard uncertainties."""
SINGULAR = 1e-9
"""Directions freed together that are as close to dependent as this count as one."""
REMOTE = 4.0
"""Explanations so many nats below the best weigh too little for their bounds to matter."""


@dataclass(frozen=True, kw_only=True)
class Setting:
    """
    The suspects of one fit, laid out for a search.

    Attributes
    ----------
    candidates, columns
    choices : Choices
    label : ndarray
        Class of each choice, shape (s + b,): alike where they cannot be told apart.
    """

    candidates: tuple[Candidate, ...]
    columns: tuple[Column, ...]
    choices: Choices
    label: NDArray[np.intp]


@dataclass(frozen=True, kw_only=True)
class Member:
    """One candidate of a group: its index and its share of the group's slot."""

    candidate: int
    share: float


@dataclass(frozen=True, kw_only=True)
class Blamed:
    """
    One item of the best explanation.

    Attributes
    ----------
    candidate : int
    probability : float
        Posterior probability that something of its class is at fault.
    group : tuple of Member
        The smallest set of candidates that holds 90 % of the slot, most likely first.
    sizes, spread : ndarray
        Amplitudes of its columns and their standard uncertainties, everything blamed set free.
    """

    candidate: int
    probability: float
    group: tuple[Member, ...]
    sizes: Vector
    spread: Vector


@dataclass(frozen=True, kw_only=True)
class Explanation:
    """
    The best admissible set of faults.

    Attributes
    ----------
    blamed : tuple of Blamed
        Largest probability first; empty where chance explains the evidence best.
    nothing : float
        Posterior probability that nothing is at fault.
    bounded : bool
        False where every explanation breaks a bound, so the best unbounded one stands.
    explained : float
        Fall of the sum of squares by freeing what is blamed.
    directions : int
        Number of directions freed.
    """

    blamed: tuple[Blamed, ...]
    nothing: float
    bounded: bool
    explained: float
    directions: int


def explain(
    evidence: Evidence, setting: Setting, log_odds: Vector, *, something: bool = False
) -> Explanation:
    """
    Find the best explanation.

    Parameters
    ----------
    evidence : Evidence
    setting : Setting
    log_odds : ndarray
        Prior log odds of each choice, shape (s + b,).
    something : bool
        An alarm says that something is at fault: the best set that is not empty is wanted, with
        its probability as it is.
    """
    choices, label = setting.choices, setting.label
    gram = Gram(evidence, choices, label)
    found = search(gram, log_odds)
    merged = _merge(found, label)
    ranked = sorted(merged.values(), key=lambda v: (-v[0], v[1][0][1]))
    bounds = _Bounds(evidence, setting)
    admissible = []
    for total, sets in ranked:
        if total < ranked[0][0] - REMOTE:
            admissible.append((total, sets))
            continue
        fit = [(w, s) for w, s in sets if bounds.hold(s)]
        if fit:
            admissible.append((_summed(fit), fit))
    admissible.sort(key=lambda v: (-v[0], v[1][0][1]))
    near = [v for v in admissible if v[0] >= ranked[0][0] - REMOTE]
    bounded = any(sets[0][1] for _, sets in near) or not ranked[0][1][0][1]
    kept = admissible if bounded else ranked
    best = kept[0][1][0][1]
    if something and not best:
        best = next((sets[0][1] for _, sets in kept if sets[0][1]), ())
    top = kept[0][0]
    whole = sum(math.exp(total - top) for total, _ in kept)
    empty = sum(math.exp(t - top) for t, sets in kept if not sets[0][1]) / whole
    known = label.tolist()
    pip: dict[int, float] = {}
    for total, sets in kept:
        for one in [known[i] for i in sets[0][1]]:
            pip[one] = pip.get(one, 0.0) + math.exp(total - top) / whole
    columns = [int(choices.column[k]) for i in best for k in choices.copies(i)]
    sizes, spread, explained = free(evidence, columns)
    blamed = []
    first = 0
    for i in best:
        count = len(choices.copies(i))
        here = slice(first, first + count)
        first += count
        blamed.append(
            Blamed(
                candidate=int(choices.owner[i]),
                probability=pip[int(label[i])],
                group=_group(gram, evidence, setting, log_odds, i, [k for k in best if k != i]),
                sizes=sizes[here],
                spread=spread[here],
            )
        )
    blamed.sort(key=lambda b: (-round(b.probability, 6), setting.candidates[b.candidate].name))
    return Explanation(
        blamed=tuple(blamed),
        nothing=empty,
        bounded=bounded or not best,
        explained=explained,
        directions=len(columns),
    )


def setting_of(
    candidates: Sequence[Candidate], columns: Sequence[Column], classes: NDArray[np.intp]
) -> Setting:
    """Lay suspects out; ``classes`` labels columns alike that are parallel, shape (C,)."""
    choices = choices_of(candidates, columns)
    single = classes[choices.column[choices.single]]
    owners = choices.owner[len(choices.single) :]
    _, block = np.unique(owners, return_inverse=True)
    label = np.concatenate([single, int(classes.max(initial=-1)) + 1 + block]).astype(np.intp)
    return Setting(
        candidates=tuple(candidates), columns=tuple(columns), choices=choices, label=label
    )


def free(evidence: Evidence, columns: Sequence[int]) -> tuple[Vector, Vector, float]:
    """Least squares amplitudes of freed columns, their uncertainties, and what they explain."""
    rows = np.array(columns, dtype=np.intp)
    if not len(rows):
        return np.zeros(0), np.zeros(0), 0.0
    length = np.sqrt(evidence.M[rows, rows])
    pull = evidence.N[rows] / length
    if len(rows) == 1:
        return pull / length, 1 / length, float(pull @ pull)
    values, vectors = np.linalg.eigh(evidence.M[rows][:, rows] / np.outer(length, length))
    keep = values > SINGULAR
    onto = vectors[:, keep] / np.sqrt(values[keep])
    inner = pull @ onto
    return (
        onto @ inner / length,
        np.sqrt(np.sum(onto**2, axis=1)) / length,
        float(inner @ inner),
    )


def _merge(
    found: dict[tuple[int, ...], float], label: NDArray[np.intp]
) -> dict[tuple[int, ...], tuple[float, list[tuple[float, tuple[int, ...]]]]]:
    """Add up sets that cannot be told apart; each with its members, best first."""
    known = label.tolist()
    merged: dict[tuple[int, ...], list[tuple[float, tuple[int, ...]]]] = {}
    for members, weight in found.items():
        key = tuple(sorted([known[i] for i in members]))
        merged.setdefault(key, []).append((weight, members))
    return {
        key: (_summed(sets), sorted(sets, key=lambda v: (-v[0], v[1])))
        for key, sets in merged.items()
    }


def _summed(sets: list[tuple[float, tuple[int, ...]]]) -> float:
    """Log of the summed weights."""
    top = max(w for w, _ in sets)
    return top + math.log(sum(math.exp(w - top) for w, _ in sets))


class _Bounds:
    """Whether what freed readings must have been is possible; each set of directions once."""

    def __init__(self, evidence: Evidence, setting: Setting) -> None:
        self.evidence = evidence
        self.setting = setting
        self.known: dict[tuple[int, ...], bool] = {(): True}

    def hold(self, members: tuple[int, ...]) -> bool:
        directions = self.setting.choices.directions
        columns = tuple(sorted([k for i in members for k in directions[i]]))
        if columns not in self.known:
            sizes, spread, _ = free(self.evidence, columns)
            self.known[columns] = all(
                c.low - SLACK * sd <= c.value - size <= c.high + SLACK * sd
                for c, size, sd in zip(
                    (self.setting.columns[k] for k in columns),
                    sizes.tolist(),
                    spread.tolist(),
                    strict=True,
                )
            )
        return self.known[columns]


def _group(
    gram: Gram, evidence: Evidence, setting: Setting, odds: Vector, item: int, others: list[int]
) -> tuple[Member, ...]:
    """Everything that could stand in the item's place, the rest of the explanation kept."""
    choices, label = setting.choices, setting.label
    weight = replacements(gram, others) + odds
    weight[np.isin(choices.owner, choices.owner[others])] = -np.inf
    weight[np.isin(label, label[others])] = -np.inf
    share = np.exp(weight - weight.max())
    share /= share.sum()
    by_class = np.bincount(label, weights=share)
    lead = int(label[item])
    wanted = [lead, *(int(k) for k in np.argsort(-by_class, kind="stable") if k != lead)]
    group: list[int] = []
    held = 0.0
    for one in wanted:
        if held >= GROUP:
            break
        group.append(one)
        held += float(by_class[one])
    group += [k for k in _near(evidence, setting, item) if k not in group]
    members: dict[int, float] = {}
    for i in np.flatnonzero(np.isin(label, group)):
        owner = int(choices.owner[i])
        members[owner] = members.get(owner, 0.0) + float(share[i])
    order = sorted(
        members,
        key=lambda k: (
            k != int(choices.owner[item]),
            -round(members[k], 9),
            setting.candidates[k].name,
        ),
    )
    return tuple(Member(candidate=k, share=members[k]) for k in order)


def _near(evidence: Evidence, setting: Setting, item: int) -> list[int]:
    """Classes so nearly parallel to a single item's that its size does not separate them."""
    choices = setting.choices
    copies = choices.copies(item)
    if len(copies) != 1:
        return []
    k = int(choices.column[copies[0]])
    length = np.sqrt(np.diag(evidence.M))
    cosine = np.abs(evidence.M[k] / length / length[k])
    delta = abs(float(evidence.N[k])) / length[k]
    near = (cosine > NEAR) & (delta * np.sqrt(np.maximum(1 - cosine, 0.0) / 2) <= APART)
    singles = choices.single
    return sorted({int(c) for c in setting.label[: len(singles)][near[choices.column[singles]]]})
