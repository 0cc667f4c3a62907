"""What a site asks its database: the SQL files, read and checked before anything is asked."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from sqlalchemy import TextClause, text

from recon.errors import FaultyFileError
from recon.ingest.rows import RowKind

SINCE = ("since", "since_us", "since_text")
UNTIL = ("until", "until_us", "until_text")
COMMENT = re.compile(r"--[^\n]*|/\*.*?\*/", re.DOTALL)
QUOTED = re.compile(r"'(?:[^']|'')*'|\"(?:[^\"]|\"\")*\"")


@dataclass(frozen=True, kw_only=True)
class Query:
    """
    One query of a site.

    Attributes
    ----------
    kind : RowKind
    path : str
        As named in messages.
    sql : str
        The file's text; it is kept as evidence of what was asked.
    parameters : frozenset of str
    """

    kind: RowKind
    path: str
    sql: str
    parameters: frozenset[str]

    @property
    def clause(self) -> TextClause:
        """The statement, ready to be given parameters."""
        return text(self.sql)


def read_queries(wanted: Mapping[RowKind, str], folders: Sequence[Path]) -> dict[RowKind, Query]:
    """
    Read and check the SQL files of a site.

    Parameters
    ----------
    wanted : mapping
        File name of each kind that comes from a query.
    folders : sequence of Path
        Where to look, in this order.

    Raises
    ------
    FaultyFileError
        A file is missing, is no single SELECT, or lacks a parameter; all faults at once.
    """
    faults: list[str] = []
    result = {}
    for kind, name in wanted.items():
        path = next((f / name for f in folders if (f / name).is_file()), None)
        if path is None:
            looked = " and ".join(str(folder) for folder in folders)
            faults.append(f"{name} ({kind} rows): no such file in {looked}.")
            continue
        try:
            sql = path.read_text(encoding="utf-8")
        except (OSError, UnicodeDecodeError) as error:
            faults.append(f"{path}: cannot be read as UTF-8 text ({error}).")
            continue
        query = query_of(kind, sql, str(path))
        faults.extend(f"{path}: {fault}" for fault in faults_of(query))
        result[kind] = query
    if faults:
        raise FaultyFileError("queries of the site", faults)
    return result


def query_of(kind: RowKind, sql: str, path: str) -> Query:
    """Read a query's text, without judging it."""
    # A colon that begins a parameter follows no word, colon or backslash: `at::text` is a cast.
    bare = QUOTED.sub("''", COMMENT.sub(" ", sql))
    names = re.findall(r"(?<![:\w\\]):(\w+)(?!:)", bare)
    return Query(kind=kind, path=path, sql=sql, parameters=frozenset(names))


def faults_of(query: Query) -> list[str]:
    """
    List what is wrong with a query before it is asked.

    Examples
    --------
    >>> faults_of(query_of(RowKind.ASSAY, "DELETE FROM results", "x.sql"))[0]
    'is no single SELECT or WITH ... SELECT statement.'
    """
    faults = []
    bare = QUOTED.sub("''", COMMENT.sub(" ", query.sql)).strip().rstrip(";").strip()
    if not re.match(r"(select|with)\b", bare, re.IGNORECASE) or ";" in bare:
        faults.append("is no single SELECT or WITH ... SELECT statement.")
    for forms in (SINCE, UNTIL):
        if not query.parameters & set(forms):
            faults.append(f"does not use :{forms[0]}, so a window would not bound what is read.")
    reading = query.kind is RowKind.READING
    if reading and "tag" not in query.parameters:
        faults.append("does not use :tag; readings are asked for one tag at a time.")
    known = {*SINCE, *UNTIL, *(("tag",) if reading else ())}
    faults.extend(
        f"unknown parameter :{name}. Known: {', '.join(':' + k for k in sorted(known))}."
        for name in sorted(query.parameters - known)
    )
    return faults
