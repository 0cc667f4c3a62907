"""Does it depend on who, or when: by shift, crew, laboratory batch, weekday, all counted."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import t as student

if TYPE_CHECKING:
    from collections.abc import Mapping, Sequence

    from numpy.typing import NDArray

    Vector = NDArray[np.float64]

FEWEST = 4
"""A group with fewer values than this is not tested."""


@dataclass(frozen=True, kw_only=True)
class GroupTest:
    """
    One group's values against all others'.

    Attributes
    ----------
    grouping, group : str
        For example ``crew`` and ``B``.
    values : int
        Values in the group.
    difference, u : float
        Mean in the group less mean outside, and its standard uncertainty [unit of the values].
    p_value : float
        Of this test alone [-].
    p_counted : float
        With every test that was made counted (Sidak) [-].
    tests : int
        How many were made.
    """

    grouping: str
    group: str
    values: int
    difference: float
    u: float
    p_value: float
    p_counted: float
    tests: int


def group_tests(values: Vector, groupings: Mapping[str, Sequence[str]]) -> tuple[GroupTest, ...]:
    """
    Compare each group with the rest, under every grouping.

    Parameters
    ----------
    values : ndarray
        Standardised adjustments, or sizes, of one suspect, one an occasion; shape (n,).
    groupings : mapping
        Name of each grouping, and the group of every occasion.

    Returns
    -------
    tuple of GroupTest
        Smallest p-value first. The values are taken to be independent and equally uncertain.

    Examples
    --------
    >>> tests = group_tests(
    ...     np.array([0.1, 2.2, -0.3, 1.9, 0.2, 2.4, -0.1, 2.0]),
    ...     {"crew": ["A", "B", "A", "B", "A", "B", "A", "B"]},
    ... )
    >>> tests[0].group, tests[0].tests, tests[0].p_counted < 0.001
    ('A', 2, True)
    """
    found: list[tuple[str, str, int, float, float, float]] = []
    for grouping, labels in groupings.items():
        if len(labels) != len(values):
            raise ValueError(f"{grouping}: {len(labels)} groups for {len(values)} values")
        named = np.array(labels, dtype=object)
        for group in dict.fromkeys(labels):
            inside = named == group
            n, m = int(inside.sum()), int((~inside).sum())
            if n < FEWEST or m < FEWEST:
                continue
            one, other = values[inside], values[~inside]
            spread = (np.sum((one - one.mean()) ** 2) + np.sum((other - other.mean()) ** 2)) / (
                n + m - 2
            )
            u = float(np.sqrt(spread * (1 / n + 1 / m)))
            difference = float(one.mean() - other.mean())
            ratio = np.array([abs(difference) / max(u, 1e-300)])
            found.append(
                (grouping, group, n, difference, u, float(2 * student.sf(ratio, n + m - 2)[0]))
            )
    count = len(found)
    return tuple(
        GroupTest(
            grouping=grouping,
            group=group,
            values=n,
            difference=difference,
            u=u,
            p_value=p,
            p_counted=float(-np.expm1(count * np.log1p(-min(p, 1 - 1e-16)))),
            tests=count,
        )
        for grouping, group, n, difference, u, p in sorted(found, key=lambda v: v[5])
    )
