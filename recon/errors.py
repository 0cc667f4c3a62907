"""Every exception this project raises on purpose, and the exit status it ends a command with.

A broken balance, a suspect meter or a missing assay is a *finding* (``recon.findings``), not an
exception. An exception means that the work asked for cannot be done: a wrong file, data that
contradict a declared equality, a broken record, or an edit that came too late.
"""

from __future__ import annotations

from collections.abc import Sequence

DONE = 0
PERSON_NEEDED = 1
BAD_INPUT = 2
CANNOT_SOLVE = 3
EVIDENCE_BROKEN = 4


class ReconError(Exception):
    """Root of all errors raised on purpose; ``status`` is the exit status of a command."""

    status = BAD_INPUT


class ConfigError(ReconError):
    """A site file, balance file or setting is wrong."""


class DataError(ReconError):
    """Data from the plant or from a sheet cannot be used as they are."""


class SolveError(ReconError):
    """No acceptable answer exists for the problem as stated."""

    status = CANNOT_SOLVE


class AuditError(ReconError):
    """The stored record is not what it was."""

    status = EVIDENCE_BROKEN


class ConflictError(ReconError):
    """Somebody else changed or holds what this step needs; nothing was written."""


class BookUnavailableError(DataError):
    """The accounting database cannot be reached or used; nothing was written."""

    def __init__(self, place: str, said: str) -> None:
        self.place = place
        super().__init__(
            f"accounting database {place}: {said}. Nothing was written; check the address, the "
            "server and its disk, then try again."
        )


class OldBookError(DataError):
    """The accounting database has another schema than this program expects."""

    def __init__(self, place: str, said: str) -> None:
        super().__init__(f"accounting database {place}: {said}")


class DamagedBookError(AuditError):
    """The accounting database, or a part of it, is not what was written; no number is given."""

    def __init__(self, place: str, said: str) -> None:
        self.place = place
        super().__init__(
            f"accounting database {place} is damaged: {said}. No number of it is shown. Restore "
            "the last good copy beside it and compare with `recon verify`."
        )


class AlteredRecordError(AuditError):
    """A stored row, chunk or trigger is not what its digest says."""

    def __init__(self, what: str, expected: str, found: str) -> None:
        self.what = what
        super().__init__(f"{what}: expected {expected}, found {found}. No number of it is shown.")


class LostClaimError(ConflictError):
    """A claim is another's now, or done; whoever held it must stop and publish nothing."""

    def __init__(self, site: str, through: str, token: int, reason: str) -> None:
        self.token = token
        super().__init__(
            f"site {site}, through {through}: claim with token {token} is lost ({reason}). "
            "Nothing was published; the next tick looks again at what is due."
        )


class FaultyFileError(ConfigError):
    """A declared file has faults; all of them are listed at once.

    Parameters
    ----------
    path : str
        The file as the user named it.
    faults : sequence of str
        One sentence a fault: place, expected, found, what to do.
    """

    def __init__(self, path: str, faults: Sequence[str]) -> None:
        self.path = path
        self.faults = tuple(faults)
        count = len(self.faults)
        head = f"{path}: {count} fault{'s' if count != 1 else ''}, nothing was computed."
        super().__init__("\n".join([head, *(f"  - {fault}" for fault in self.faults)]))


class UnreadableFileError(ConfigError):
    """A file is missing, is not readable, or is not in the format its name says."""

    def __init__(self, path: str, reason: str) -> None:
        self.path = path
        self.reason = reason
        super().__init__(f"{path}: {reason}")


class UnknownUnitError(ConfigError):
    """A unit is not in the closed table of ``recon.units``."""

    def __init__(self, unit: str, known: Sequence[str]) -> None:
        self.unit = unit
        super().__init__(f'unknown unit "{unit}". Known units: {", ".join(known)}.')


class WrongUnitKindError(ConfigError):
    """Two units of different kinds were to be converted into one another."""

    def __init__(self, unit: str, found: str, expected: str) -> None:
        super().__init__(f'unit "{unit}" is a {found}; a {expected} is expected here.')


class ContradictionError(SolveError):
    """Balances, relations and held figures cannot all be met.

    Parameters
    ----------
    rows : sequence of str
        Readable names of the equalities that stay open, worst first, with the gap.
    """

    def __init__(self, rows: Sequence[str]) -> None:
        self.rows = tuple(rows)
        super().__init__(
            "Balances, relations, bounds and held figures cannot be met together. Open: "
            + "; ".join(self.rows)
            + ". Release a held figure or correct a relation."
        )


class NotAcceptedError(SolveError):
    """Every engine's answer failed our own checks.

    Parameters
    ----------
    reasons : sequence of str
        One sentence an engine: which check failed, by how much, and where.
    """

    def __init__(self, reasons: Sequence[str]) -> None:
        self.reasons = tuple(reasons)
        super().__init__("No answer passed the acceptance checks. " + " ".join(self.reasons))


class AlreadyServedError(ConflictError):
    """Another process serves this embedded book; status 75 tells a supervisor to leave it be."""

    status = 75

    def __init__(self, book: str, holder: str) -> None:
        self.holder = holder
        super().__init__(
            f"{book} is already served by {holder}. An embedded book has one service at a time: "
            "stop that one first, or keep the book on a PostgreSQL server."
        )


class AddressTakenError(ConfigError):
    """The health page's address cannot be had."""

    def __init__(self, host: str, port: int, reason: str) -> None:
        super().__init__(
            f"health page: {host} port {port} cannot be used ({reason}). Set health_port to a free "
            "port, or to 0 for any."
        )


class ForbiddenStepError(ConflictError):
    """A month may not take this step, or not by this person."""

    def __init__(self, month: str, step: str, reason: str) -> None:
        super().__init__(f"{month}: cannot {step}: {reason}.")


class StaleViewError(ConflictError):
    """What a person looked at is no longer what is current; nothing was written."""

    def __init__(self, month: str, seen: str, current: str) -> None:
        super().__init__(
            f"{month}: you name the digest {seen[:16] or '(none)'}, current is {current[:16]}. "
            "Look at the statement again, then name its digest."
        )


class BlockedError(ConflictError):
    """Something blocks the close of a month; all of it is listed."""

    def __init__(self, month: str, step: str, blockers: Sequence[str]) -> None:
        self.blockers = tuple(blockers)
        lines = "".join(f"\n  - {blocker}" for blocker in self.blockers)
        super().__init__(f"{month}: cannot {step} yet:{lines}")


class NoInstantError(DataError):
    """A value of a source is not an instant.

    Parameters
    ----------
    what : str
        What it is instead.
    found : object
        The value.
    """

    def __init__(self, what: str, found: object) -> None:
        self.what = what
        self.found = found
        super().__init__(f"{what}: {found!r}.")


class PlantAddressError(ConfigError):
    """The address of the plant's database cannot be used."""

    def __init__(self, reason: str) -> None:
        super().__init__(
            f"address of the plant's database: {reason} Write sqlite:///path/to/file.sqlite or "
            "postgresql://user@host/database."
        )


class PlantUnreachableError(DataError):
    """The plant's database did not answer, though it was asked again and again."""

    def __init__(self, source: str, reason: str, tries: int) -> None:
        self.reason = reason
        super().__init__(
            f"{source}: could not be read, {tries} {'try' if tries == 1 else 'tries'} ({reason}). "
            "Check address, network and account; nothing was read."
        )


class PlantQueryError(DataError):
    """The plant's database refused a query, for example because a table is missing."""

    def __init__(self, source: str, query: str, reason: str) -> None:
        self.query = query
        self.reason = reason
        super().__init__(
            f"{query} was refused by {source}: {reason}. Correct the query or the account's rights."
        )


class ContractError(DataError):
    """Rows of a source break the column contract; all faults of the batch are listed.

    Parameters
    ----------
    source : str
        Query or sheet.
    faults : sequence of str
        One line a fault: column, what is wrong, the first value, where.
    """

    def __init__(self, source: str, faults: Sequence[str]) -> None:
        self.source = source
        self.faults = tuple(faults)
        count = len(self.faults)
        head = f"{source}: {count} fault{'s' if count != 1 else ''}, nothing of it is used."
        super().__init__("\n".join([head, *(f"  - {fault}" for fault in self.faults)]))
