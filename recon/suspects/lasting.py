"""Days together: a lasting fault named from all of them, and one day as prior for the next."""

from __future__ import annotations

from typing import TYPE_CHECKING

import numpy as np

from recon.suspects.beam import Evidence
from recon.suspects.days import Baseline, aligned, pseudo_inverse

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    from recon.suspects.days import DayEvidence, Key
    from recon.suspects.explain import Setting

    Vector = NDArray[np.float64]

STAYS = 0.95
"""Share of faults still there on the next day (common practice; a site may know better)."""


def evidence_of_days(days: Sequence[DayEvidence], baseline: Baseline, setting: Setting) -> Evidence:
    """
    Gather what days say of faults that lasted through all of them, baseline taken out.

    Parameters
    ----------
    days : sequence of DayEvidence
        Since the onset, in time order.
    baseline : Baseline
        Its own variance is part of the evidence's.
    setting : Setting
        Suspects of the search; those the days do not know say nothing.

    Returns
    -------
    Evidence
        Per amplitude of the setting's columns, for ``recon.suspects.explain.explain``.
    """
    keys, laid = aligned(days, baseline.keys)
    N = np.sum([n - m @ baseline.constant for n, m in laid], axis=0)
    M = np.sum([m for _, m in laid], axis=0)
    # N ~ N(M b, M + M B^-1 M): whitened, the information is (M^-1 + B^-1)^-1.
    both = pseudo_inverse(pseudo_inverse(M) + baseline.inverse)
    pull = both @ pseudo_inverse(M) @ N
    place = {key: i for i, key in enumerate(keys)}
    count = len(setting.columns)
    take, scale = np.zeros(count, dtype=np.intp), np.zeros(count)
    for candidate in setting.candidates:
        i = place.get((candidate.kind, candidate.name))
        if i is not None and len(candidate.columns) == 1:
            k = candidate.columns[0]
            take[k], scale[k] = i, setting.columns[k].scale
    return Evidence(
        N=scale * pull[take], M=scale[:, None] * both[np.ix_(take, take)] * scale[None, :]
    )


def carried_odds(
    log_odds: Vector, setting: Setting, yesterday: Mapping[Key, float], *, stays: float = STAYS
) -> Vector:
    """
    Let one day's posterior be the next day's prior.

    Parameters
    ----------
    log_odds : ndarray
        Calibrated prior log odds of each choice, shape (s + b,).
    setting : Setting
    yesterday : mapping
        Probability of each suspect, by kind and name, after the day before.
    stays : float
        Share of faults that are still there a day later [-].

    Returns
    -------
    ndarray
        Shape (s + b,): ``p = stays x yesterday + (1 - yesterday) x calibrated``, never below the
        calibrated odds.

    Notes
    -----
    It sharpens *naming*; the alarm does not use it, so its false-alarm rate stays as stated.
    """
    result = np.array(log_odds, dtype=np.float64)
    for choice, owner in enumerate(setting.choices.owner.tolist()):
        candidate = setting.candidates[owner]
        known = yesterday.get((candidate.kind, candidate.name), 0.0)
        if known <= 0.0:
            continue
        fresh = 1 / (1 + np.exp(-result[choice]))
        p = min(stays * known + (1 - known) * fresh, 0.999)
        # A candidate stands for two choices, one a plausible size; each carries half.
        result[choice] = max(float(result[choice]), float(np.log(p / 2) - np.log1p(-p / 2)))
    return result
