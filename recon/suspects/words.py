"""What may be said of an instrument to people near it: evidence, never an errand into danger."""

from __future__ import annotations

from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from collections.abc import Collection, Sequence

    from recon.suspects.naming import Suspect

GUARDED = ("protective", "nuclear", "molten metal", "acid")
"""Services for which no field instruction is given."""
RAISE_WITH_OWNER = (
    "raise with the owner under site permits; agreement with its neighbours says nothing about "
    "its protective duty"
)
AGREES = "agrees with its neighbours"
"""The most that is ever said in an instrument's favour: consistent in a balance, no more."""
ADVICE = {
    "meter": "compare its zero and span with the last calibration",
    "assay": "ask the laboratory for a repeat on the retained sample",
    "sampler": "check cutter, increments and sample mass at the next planned stop",
    "stock": "survey again",
    "source": "review the last calibration or method check that these readings share",
    "leak": "look for flows that nobody measures at this place",
}
WORDS_SHOWN = 6


def advice_for(kind: str, services: Collection[str]) -> str:
    """
    Say what to do next about a suspect.

    Parameters
    ----------
    kind : str
        meter, assay, sampler, stock, source, leak.
    services : collection of str
        Every other duty of the instruments in its group: protective, nuclear, molten metal, acid,
        custody, statutory.

    Examples
    --------
    >>> advice_for("assay", [])
    'ask the laboratory for a repeat on the retained sample'
    >>> advice_for("meter", ["nuclear"]).startswith("raise with the owner under site permits")
    True
    """
    guarded = any(service in GUARDED for service in services)
    return RAISE_WITH_OWNER if guarded else ADVICE.get(kind, "gather more evidence")


def sentence_on(suspect: Suspect, services: Collection[str] = ()) -> str:
    """
    Put a suspect in one or two sentences: who, which way, by how much, how sure, what to do.

    Parameters
    ----------
    suspect : Suspect
    services : collection of str
        Other duties of the instruments in its group.
    """
    if suspect.kind == "unexplained":
        return f"Unexplained: {suspect.note}. Nothing was set aside."
    size, u = suspect.size or 0.0, suspect.u or 0.0
    unit = f" {suspect.unit}" if suspect.unit else ""
    verb = _verb(suspect.kind, size)
    # A group with a guarded instrument in it is guarded whole: its members cannot be told apart.
    parts = [
        f"{suspect.certainty.capitalize()} ({suspect.probability or 0.0:.2f}), {suspect.kind} "
        f"{suspect.names[0]}: {verb} {abs(size):.4g} ± {u:.2g}{unit}"
    ]
    if suspect.copper is not None:
        parts.append(f"that is {abs(suspect.copper):.3g} t of copper")
    others = dict.fromkeys(
        f"leak at {a.name}" if a.kind == "leak" else a.name for a in suspect.alternatives[1:]
    )
    if others:
        parts.append(f"fits as well or nearly: {_listed(tuple(others))}")
    if suspect.balances:
        open_ones = ", ".join(f"{name} ({z:+.1f} u)" for name, z in suspect.balances)
        parts.append(f"balances that testify: {open_ones}")
    if suspect.note:
        parts.append(suspect.note)
    return "; ".join(parts) + f". Next: {advice_for(suspect.kind, services)}."


def _verb(kind: str, size: float) -> str:
    if kind == "leak":
        return "loses, unseen," if size > 0 else "gains, unseen,"
    return "reads high by" if size > 0 else "reads low by"


def _listed(names: Sequence[str]) -> str:
    shown = ", ".join(names[:WORDS_SHOWN])
    more = len(names) - WORDS_SHOWN
    return f"{shown} and {more} more" if more > 0 else shown
