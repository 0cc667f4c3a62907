"""Reconcile a self-contained balance file, without any database."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from recon.declare.balance_file import read_balance
from recon.reconcile.read import reconcile
from recon.suspects.alarm import Alarm, raise_alarm
from recon.suspects.naming import Suspect, name_suspects

if TYPE_CHECKING:
    from collections.abc import Callable, Mapping
    from pathlib import Path

    from recon.reconcile.answer import Answer
    from recon.reconcile.solver import Engine


@dataclass(frozen=True, kw_only=True)
class SolvedFile:
    """A balance file with its answer and what is suspicious about it."""

    title: str
    answer: Answer
    alarm: Alarm
    suspects: tuple[Suspect, ...]


def solve_file(
    path: Path,
    *,
    engine: Engine,
    level: float,
    sheets: Callable[[Path], Mapping[str, Any]] | None = None,
) -> SolvedFile:
    """
    Read, reconcile and test a balance file.

    Parameters
    ----------
    path : Path
        TOML file or workbook.
    engine : Engine
    level : float
        Plant-wide false-alarm rate of the alarm [-].
    sheets : callable, optional
        Reads a workbook into tables.

    Raises
    ------
    ConfigError
        The file is wrong.
    SolveError
        The data cannot satisfy the equalities.
    """
    balance = read_balance(path, sheets)
    answer = reconcile(balance.problem, engine)
    alarm = raise_alarm(answer.tests, level)
    return SolvedFile(
        title=balance.title,
        answer=answer,
        alarm=alarm,
        suspects=name_suspects(answer, alarm),
    )
