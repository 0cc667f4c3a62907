"""How likely a fault is before the evidence: odds at which chance is blamed at a stated rate."""

from __future__ import annotations

from dataclasses import replace
from typing import TYPE_CHECKING

import numpy as np

from recon.suspects.explain import Setting, setting_of

if TYPE_CHECKING:
    from numpy.typing import NDArray

    from recon.suspects.signatures import Signatures

    Vector = NDArray[np.float64]

DRAWS = 8_000
"""Fault-free periods simulated; fewer, in single precision, where a month makes each dear."""
DRAWS_LARGE = 2_000
LARGE = 1_000
"""Directions above which a problem is large."""
SEED = 20_261_202
NARROW = 400
"""Candidates a search is made among; of more, those that explain most alone."""
_KNOWN: dict[tuple[str, float], float] = {}
KEPT = 64
LEAK_ODDS = 1 / 20
"""Odds of matter lost unseen at a node, in one composition, against those of an instrument's fault:
most open balances are instruments (common practice). A site may know better."""


def log_odds_of(signatures: Signatures, level: float) -> Vector:
    """
    Give the prior log odds of every choice at which fault-free data are blamed at a stated rate.

    Single faults dominate what chance brings about, so the common part of the odds is minus the
    quantile of the largest gain of any class alone. Cached by the digest of signatures and
    plausible sizes.

    Parameters
    ----------
    signatures : Signatures
    level : float
        Plant-wide rate [-].

    Returns
    -------
    ndarray
        Shape (s + b,), in the order of ``setting_of(...).choices``.
    """
    key = (signatures.digest, level)
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    relative = relative_odds(setting)
    if key not in _KNOWN:
        while len(_KNOWN) >= KEPT:
            _KNOWN.pop(next(iter(_KNOWN)))
        _KNOWN[key] = _simulate(signatures, setting, relative, level)
    return relative + _KNOWN[key]


def relative_odds(setting: Setting) -> Vector:
    """Log odds of each choice against an instrument's, shape (s + b,)."""
    odds = [0.0 if c.kind != "leak" else float(np.log(LEAK_ODDS)) for c in setting.candidates]
    return np.array(odds)[setting.choices.owner]


def _simulate(signatures: Signatures, setting: Setting, relative: Vector, level: float) -> float:
    choices, label = setting.choices, setting.label
    order = np.argsort(label, kind="stable")
    starts = np.flatnonzero(np.diff(label[order], prepend=-1))
    freedom = signatures.G.shape[0]
    random = np.random.default_rng(SEED)
    large = signatures.G.shape[1] > LARGE
    draws, step = (DRAWS_LARGE, 200) if large else (DRAWS, 1_000)
    onto = signatures.G.T.astype(np.float32) if large else signatures.G.T
    h = choices.scale
    v = (h * signatures.length[choices.column]) ** 2
    roots = []
    for block in choices.blocks:
        g = signatures.G[:, choices.column[block]] * h[block]
        roots.append(np.linalg.cholesky(g.T @ g + np.eye(len(block))))
    largest = np.empty(draws)
    for first in range(0, draws, step):
        t = onto @ random.standard_normal((freedom, step)).astype(onto.dtype)
        c = h[:, None] * t[choices.column]
        d = 1 + v[choices.single]
        gains = np.empty((len(label), step))
        singles = len(choices.single)
        gains[:singles] = (c[choices.single] ** 2 / d[:, None] - np.log(d)[:, None]) / 2
        for k, (block, root) in enumerate(zip(choices.blocks, roots, strict=True)):
            solved = np.linalg.solve(root, c[block])
            gains[singles + k] = np.sum(solved**2, axis=0) / 2 - np.log(np.diag(root)).sum()
        ordered = (gains + relative[:, None])[order]
        top = ordered.max(axis=0)
        summed = np.add.reduceat(np.exp(ordered - top), starts, axis=0)
        largest[first : first + step] = top + np.log(summed.max(axis=0))
    return -float(np.quantile(largest, 1 - level))


def narrowed(
    signatures: Signatures, log_odds: Vector, most: int = NARROW
) -> tuple[Signatures, Vector]:
    """
    Keep the candidates that explain most alone, where there are too many to search among.

    The odds stay those of all of them, so chance is not blamed more often for it.
    """
    if len(signatures.candidates) <= most:
        return signatures, log_odds
    setting = setting_of(signatures.candidates, signatures.columns, signatures.classes)
    choices = setting.choices
    best = np.full(len(signatures.candidates), -np.inf)
    pull, size = signatures.G.T @ signatures.z, signatures.length
    for choice in range(len(choices.owner)):
        copies = choices.copies(choice)
        k, h = choices.column[copies], choices.scale[copies]
        d = 1 + (h * size[k]) ** 2
        alone = float(np.sum((h * pull[k]) ** 2 / d - np.log(d)) / 2 + log_odds[choice])
        best[choices.owner[choice]] = max(best[choices.owner[choice]], alone)
    kept = np.sort(np.argsort(-best, kind="stable")[:most])
    columns = sorted({k for i in kept for k in signatures.candidates[i].columns})
    place = {old: new for new, old in enumerate(columns)}
    small = replace(
        signatures,
        G=signatures.G[:, columns],
        columns=tuple(signatures.columns[k] for k in columns),
        candidates=tuple(
            replace(
                signatures.candidates[i],
                columns=tuple(place[k] for k in signatures.candidates[i].columns),
            )
            for i in kept
        ),
    )
    common = float(log_odds.max())
    return small, common + relative_odds(setting_of(small.candidates, small.columns, small.classes))
