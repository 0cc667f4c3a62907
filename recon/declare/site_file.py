"""What a site file says: from its tables to a ``Site``, or every fault in it at once.

A site file is TOML: a table ``[site]`` for the scalars, then lists of tables ``[[section]]``,
``[[node]]``, ``[[stream]]``, ``[[source]]``, ``[[instrument]]``, ``[[relation]]``, ``[[figure]]``,
``[[window]]``, ``[[shift]]``, ``[[query]]``. ``config/starting-point.toml`` shows every key.

One file is one *version*, in force from the plant day ``valid_from``. A version is identified by
its **digest: the SHA-256 of the file's bytes as they are**, in lower-case hexadecimal; a changed
comment is another version.
"""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter

from recon.declare.faults import did_you_mean, shaped
from recon.declare.site import Site, SiteNode, SiteStream
from recon.declare.site_instruments import Places, check_instruments, served_tags
from recon.declare.site_meaning import (
    Known,
    Placed,
    check_head,
    check_nodes,
    check_ratios,
    check_shifts_and_queries,
    check_sources,
    check_streams,
    check_twice,
)
from recon.declare.site_shape import HEAD, LISTS, declared, shape_of
from recon.errors import FaultyFileError, UnreadableFileError
from recon.flowsheet.checks import find_forced_zeros, find_loose_nodes
from recon.flowsheet.network import Flowsheet, Node, Stream


@dataclass(frozen=True, kw_only=True)
class SiteFile:
    """
    One version of a site with the text it was read from.

    Attributes
    ----------
    path : str
        As named by the user.
    text : str
        The whole file; the book keeps it.
    digest : str
        SHA-256 of the file's bytes, hexadecimal.
    site : Site
    """

    path: str
    text: str
    digest: str
    site: Site


def read_versions(path: Path) -> tuple[SiteFile, ...]:
    """
    Read one site file, or every ``.toml`` file of a folder as versions of one site.

    Returns
    -------
    tuple of SiteFile
        Rising by ``valid_from``.

    Raises
    ------
    UnreadableFileError
        Nothing is there, or it is not UTF-8 text or not TOML.
    FaultyFileError
        Every fault of every file, or versions that do not belong together.
    """
    if not path.is_dir():
        return (read_site(path),)
    paths = sorted(path.glob("*.toml"))
    if not paths:
        raise UnreadableFileError(str(path), "holds no .toml file; a site file is expected.")
    versions: list[SiteFile] = []
    faults: list[str] = []
    for one in paths:
        try:
            versions.append(read_site(one))
        except FaultyFileError as error:
            faults.extend(f"{one.name}: {fault}" for fault in error.faults)
        except UnreadableFileError as error:
            faults.append(f"{one.name}: {error.reason}")
    versions.sort(key=lambda v: v.site.valid_from)
    faults.extend(_disagreements(versions))
    if faults:
        raise FaultyFileError(str(path), faults)
    return tuple(versions)


def read_site(path: Path) -> SiteFile:
    """
    Read one version of a site.

    Raises
    ------
    UnreadableFileError, FaultyFileError
    """
    try:
        content = path.read_bytes()
    except OSError as error:
        raise UnreadableFileError(str(path), f"cannot be read: {error.strerror}.") from error
    return site_from_bytes(content, str(path))


def site_from_bytes(content: bytes, path: str) -> SiteFile:
    """
    Understand the bytes of a site file, for example as the book kept them.

    Parameters
    ----------
    content : bytes
        UTF-8 TOML.
    path : str
        Named in messages.

    Raises
    ------
    UnreadableFileError, FaultyFileError
    """
    try:
        text = content.decode("utf-8")
        tables = tomllib.loads(text)
    except UnicodeDecodeError as error:
        raise UnreadableFileError(path, "is not UTF-8 text.") from error
    except tomllib.TOMLDecodeError as error:
        raise UnreadableFileError(path, f"is not valid TOML: {error}.") from error
    return SiteFile(path=path, text=text, digest=digest_of(content), site=site_of(tables, path))


def digest_of(content: bytes) -> str:
    """
    Give the digest by which a version is known: SHA-256 of its bytes.

    Examples
    --------
    >>> digest_of(b"abc")[:16]  # FIPS 180-4, example of the standard
    'ba7816bf8f01cfea'
    """
    return hashlib.sha256(content).hexdigest()


def site_of(tables: Mapping[str, Any], path: str) -> Site:
    """
    Understand the tables of a site file.

    Parameters
    ----------
    tables : mapping
        As a TOML reader gives them.
    path : str
        Named in messages.

    Raises
    ------
    FaultyFileError
        Something is wrong; every fault is listed.
    """
    faults: list[str] = []
    allowed = {HEAD, *LISTS}
    for key in [k for k in tables if k not in allowed]:
        faults.append(f"{key}: unknown table. {did_you_mean(key, allowed)}")
    head = shaped(TypeAdapter(shape_of(Site)), tables.get(HEAD, {}), HEAD, faults)
    lists = {name: _entries(tables, name, kind, faults) for name, (_, kind) in LISTS.items()}
    known = _known(tables, lists)
    site: Site | None = None
    if head is not None:
        fields: dict[str, Any] = {name: getattr(head, name) for name in head.model_fields_set}
        for name, (field, _) in LISTS.items():
            fields[field] = tuple(entry for _, entry in lists[name])
        site = Site(**fields)
        check_head(site, faults)
    _check_lists(tables, lists, known, faults)
    if faults or site is None:
        raise FaultyFileError(path, faults)
    return site


def flowsheet_of(site: Site) -> Flowsheet:
    """
    Draw the flowsheet of one day of a site.

    Quantities stand in the site's order; a stock quantity without bounds has 0 and no limit.
    """
    return _flowsheet(site.quantities, site.nodes, site.streams)


def _flowsheet(
    quantities: Sequence[str], nodes: Sequence[SiteNode], streams: Sequence[SiteStream]
) -> Flowsheet:
    return Flowsheet(
        quantities=tuple(quantities),
        nodes=tuple(
            Node(
                name=n.name,
                conserves=tuple(q for q in quantities if q in n.conserves),
                same_composition=n.same_composition,
                stock=n.stock,
                bounds=tuple((q, *n.bounds[q]) for q in quantities if q in n.bounds),
            )
            for n in nodes
        ),
        streams=tuple(
            Stream(
                name=s.name,
                source=s.source,
                target=s.target,
                carries=tuple(q for q in quantities if q in s.carries),
            )
            for s in streams
        ),
    )


def _entries(
    tables: Mapping[str, Any], name: str, kind: type, faults: list[str]
) -> list[tuple[str, Any]]:
    """Give place and entry of every table of a list whose shape is right."""
    found = tables.get(name, [])
    if not isinstance(found, list):
        faults.append(f"{name}: write [[{name}]], a list of tables.")
        return []
    adapter = TypeAdapter(shape_of(kind))
    result = []
    for n, entry in enumerate(found, start=1):
        named = entry if isinstance(entry, dict) else {}
        label = named.get("name", named.get("tag"))
        place = f"{name} {n}" + (f" ({label})" if label else "")
        table = shaped(adapter, entry, place, faults)
        if table is not None:
            result.append((place, declared(kind, table)))
    return result


def _known(tables: Mapping[str, Any], lists: Mapping[str, Placed[Any]]) -> Known:
    head = tables.get(HEAD, {})
    quantities = head.get("quantities", []) if isinstance(head, dict) else []
    return Known(
        quantities=frozenset(q for q in quantities if isinstance(q, str))
        if isinstance(quantities, list)
        else frozenset(),
        sections=_names(tables, "section"),
        nodes=_names(tables, "node"),
        streams=_names(tables, "stream"),
        sources=_names(tables, "source"),
        tags=_names(tables, "instrument", "tag"),
        carried={stream.name: stream.carries for _, stream in lists["stream"]},
    )


def _names(tables: Mapping[str, Any], name: str, key: str = "name") -> frozenset[str]:
    """All names declared in a list, those of faulty entries included."""
    found = tables.get(name, [])
    if not isinstance(found, list):
        return frozenset()
    return frozenset(str(e[key]) for e in found if isinstance(e, dict) and key in e)


def _faulty(tables: Mapping[str, Any], lists: Mapping[str, Placed[Any]], name: str) -> bool:
    found = tables.get(name, [])
    return not isinstance(found, list) or len(lists[name]) < len(found)


def _check_lists(
    tables: Mapping[str, Any],
    lists: Mapping[str, Placed[Any]],
    known: Known,
    faults: list[str],
) -> None:
    for name in ("section", "node", "stream", "source", "relation", "figure", "window", "shift"):
        check_twice(((place, entry.name) for place, entry in lists[name]), faults)
    check_twice(((place, i.tag) for place, i in lists["instrument"]), faults)
    before = len(faults)
    check_nodes(lists["node"], known, faults)
    check_streams(lists["stream"], known, faults)
    drawn = len(faults) == before and not any(
        _faulty(tables, lists, name) for name in ("node", "stream")
    )
    if not known.nodes or not known.streams:
        faults.append("node, stream: at least one of each is needed; nothing is drawn.")
    elif drawn:
        faults.extend(_drawing_faults(lists, known))
    check_sources(lists["source"], known, faults)
    instruments = lists["instrument"]
    served = served_tags(instruments, lists["stream"], lists["source"])
    if any(_faulty(tables, lists, name) for name in ("instrument", "stream", "source")):
        served |= known.tags
    places = Places(
        known=known,
        nodes={node.name: node for _, node in lists["node"]},
        instruments={i.tag: i for _, i in instruments},
        served=served,
    )
    check_instruments(instruments, places, faults)
    check_ratios(lists["figure"], lists["window"], lists["relation"], known, faults)
    check_shifts_and_queries(lists["shift"], lists["query"], faults)


def _drawing_faults(lists: Mapping[str, Placed[Any]], known: Known) -> Iterator[str]:
    quantities = sorted(known.quantities)
    nodes, streams = ([entry for _, entry in lists[name]] for name in ("node", "stream"))
    sheet = _flowsheet(quantities, nodes, streams)
    for finding in (*find_loose_nodes(sheet), *find_forced_zeros(sheet)):
        yield finding.text


def _disagreements(versions: Sequence[SiteFile]) -> Iterator[str]:
    """Find what keeps files from being versions of one site."""
    for before, after in pairwise(versions):
        names = f"{Path(before.path).name} and {Path(after.path).name}"
        if before.site.valid_from == after.site.valid_from:
            yield f"{names}: both are valid from {after.site.valid_from}; one of them must go."
        for key in ("name", "zone", "day_cut"):
            old, new = getattr(before.site, key), getattr(after.site, key)
            if old != new:
                why = (
                    "they are not versions of one site"
                    if key == "name"
                    else "days would overlap or leave a gap"
                )
                yield f'{names}: {key} "{old}" and "{new}" differ; {why}.'
