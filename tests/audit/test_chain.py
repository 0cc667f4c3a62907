"""The chain: any edit of any entry is found, and a chain written anew only by an outside head."""

from __future__ import annotations

import random
from dataclasses import replace
from datetime import UTC, datetime, timedelta

import pytest

from recon.audit.canonical import canonical
from recon.audit.chain import FIRST, Break, Entry, Head, check_chain, link

START = datetime(2026, 2, 1, tzinfo=UTC)


def chain(count: int, actor: str = "service") -> list[Entry]:
    entries: list[Entry] = []
    head = Head(seq=0, hash=FIRST)
    for n in range(count):
        entry = link(
            site="five",
            after=head,
            at=START + timedelta(hours=n),
            actor=actor,
            action="publish",
            subject=f"run {n}",
            body=canonical({"value": n / 7}),
        )
        entries.append(entry)
        head = Head(seq=entry.seq, hash=entry.hash)
    return entries


def test_an_untouched_chain_ends_where_its_last_entry_says() -> None:
    entries = chain(20)
    assert check_chain(entries) == Head(seq=20, hash=entries[-1].hash)
    assert check_chain([]) == Head(seq=0, hash=FIRST)


@pytest.mark.parametrize(
    "change",
    [
        {"at": START},
        {"actor": "somebody else"},
        {"action": "approve"},
        {"subject": "run 8"},
        {"body": canonical({"value": 2.0})},
        {"prev_hash": FIRST},
        {"hash": FIRST},
        {"seq": 9},
        {"site": "six"},
    ],
    ids=lambda change: next(iter(change)),
)
def test_a_changed_field_is_found_at_its_entry(change: dict[str, object]) -> None:
    entries = chain(12)
    entries[7] = replace(entries[7], **change)  # type: ignore[arg-type]
    found = check_chain(entries)
    assert isinstance(found, Break)
    assert found.seq == 8
    assert found.last_intact_actor == "service"


def test_random_edits_are_all_found_against_a_head_kept_outside() -> None:
    """Seed 7: an entry removed, two swapped, one doubled, a letter changed, the tail cut."""
    random.seed(7)
    entries = chain(40)
    outside = Head(seq=40, hash=entries[-1].hash)
    missed = 0
    for _ in range(500):
        edited, place = list(entries), random.randrange(39)
        kind = random.randrange(5)
        if kind == 0:
            del edited[place]
        elif kind == 1:
            edited[place], edited[place + 1] = edited[place + 1], edited[place]
        elif kind == 2:
            edited.insert(place, edited[place])
        elif kind == 3:
            body = bytearray(edited[place].body)
            body[random.randrange(len(body))] ^= 1
            edited[place] = replace(edited[place], body=bytes(body))
        else:
            edited = edited[: place + 1]
        found = check_chain(edited, outside)
        missed += not (isinstance(found, Break) and found.seq <= place + 2)
    assert missed == 0


def test_a_chain_written_anew_agrees_with_itself_and_not_with_the_outside_head() -> None:
    entries = chain(10)
    anew = chain(10, actor="nobody asked")
    assert isinstance(check_chain(anew), Head)
    found = check_chain(anew, Head(seq=5, hash=entries[4].hash))
    assert isinstance(found, Break)
    assert "kept outside" in found.what
    assert found.seq == 5


def test_the_hash_can_be_made_by_hand() -> None:
    import hashlib

    entry = chain(1)[0]
    by_hand = (
        b'{"action":"publish","actor":"service","at":"2026-02-01T00:00:00.000000Z",'
        b'"prev_hash":"' + b"0" * 64 + b'","seq":"1","site":"five","subject":"run 0"}\n'
        b'{"value":"0.0"}'
    )
    assert entry.hash == hashlib.sha256(by_hand).hexdigest()
