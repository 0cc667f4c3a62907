"""The tree and its proofs, against the vectors of certificate transparency's reference code.

Leaves, roots and proofs are those of the public reference implementation's tests for RFC 6962,
from memory; that they come out at all to the last digit is the check.
"""

from __future__ import annotations

import hashlib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from recon.audit.merkle import (
    consistency_proof,
    inclusion_proof,
    is_consistent,
    is_included,
    leaf_hash,
    root,
)

ENTRIES = [
    bytes.fromhex(text)
    for text in (
        "",
        "00",
        "10",
        "2021",
        "3031",
        "40414243",
        "5051525354555657",
        "606162636465666768696a6b6c6d6e6f",
    )
]
LEAVES = [leaf_hash(entry) for entry in ENTRIES]
ROOTS = (
    "6e340b9cffb37a989ca544e6bb780a2c78901d3fb33738768511a30617afa01d",
    "fac54203e7cc696cf0dfcb42c92a1d9dbaf70ad9e621f4bd8d98662f00e3c125",
    "aeb6bcfe274b70a14fb067a5e5578264db0fa9b51af5e0ba159158f329e06e77",
    "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
    "4e3bbb1f7b478dcfe71fb631631519a3bca12c9aefca1612bfce4c13a86264d4",
    "76e67dadbcdf1e10e1b74ddc608abd2f98dfb16fbce75277b5232a127f2087ef",
    "ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c",
    "5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328",
)
INCLUSION = {
    (1, 1): (),
    (1, 8): (
        "96a296d224f285c67bee93c30f8a309157f0daa35dc5b87e410b78630a09cfc7",
        "5f083f0a1a33ca076a95279832580db3e0ef4584bdff1f54c8a360f50de3031e",
        "6b47aaf29ee3c2af9af889bc1fb9254dabd31177f16232dd6aab035ca39bf6e4",
    ),
    (6, 8): (
        "bc1a0643b12e4d2d7c77918f44e0f4f79a838b6cf9ec5b5c283e1f4d88599e6b",
        "ca854ea128ed050b41b35ffc1b87b8eb2bde461e9e3b5596ece6b9d5975a0ae0",
        "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
    ),
}
CONSISTENCY = {
    (1, 1): (),
    (1, 8): INCLUSION[1, 8],
    (6, 8): (
        "0ebc5d3437fbe2db158b9f126a1d118e308181031d0a949f8dededebc558ef6a",
        "ca854ea128ed050b41b35ffc1b87b8eb2bde461e9e3b5596ece6b9d5975a0ae0",
        "d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
    ),
    (2, 5): (
        "5f083f0a1a33ca076a95279832580db3e0ef4584bdff1f54c8a360f50de3031e",
        "bc1a0643b12e4d2d7c77918f44e0f4f79a838b6cf9ec5b5c283e1f4d88599e6b",
    ),
}


def hexes(proof: tuple[bytes, ...]) -> tuple[str, ...]:
    return tuple(part.hex() for part in proof)


@pytest.mark.reference
def test_roots_are_those_of_the_published_vectors() -> None:
    assert tuple(root(LEAVES[:n]).hex() for n in range(1, 9)) == ROOTS
    assert root([]) == hashlib.sha256(b"").digest()


@pytest.mark.reference
@pytest.mark.parametrize(("place", "size"), INCLUSION)
def test_inclusion_proofs_are_those_of_the_published_vectors(place: int, size: int) -> None:
    proof = inclusion_proof(LEAVES[:size], place - 1)
    assert hexes(proof) == INCLUSION[place, size]
    assert is_included(LEAVES[place - 1], place - 1, size, proof, root(LEAVES[:size]))


@pytest.mark.reference
@pytest.mark.parametrize(("earlier", "size"), CONSISTENCY)
def test_consistency_proofs_are_those_of_the_published_vectors(earlier: int, size: int) -> None:
    proof = consistency_proof(LEAVES[:size], earlier)
    assert hexes(proof) == CONSISTENCY[earlier, size]
    assert is_consistent(earlier, size, root(LEAVES[:earlier]), root(LEAVES[:size]), proof)


@given(size=st.integers(1, 70), data=st.data())
def test_every_leaf_of_every_tree_is_proved_and_no_other_leaf_is(
    size: int, data: st.DataObject
) -> None:
    leaves = [leaf_hash(bytes([n])) for n in range(size)]
    index = data.draw(st.integers(0, size - 1))
    proof = inclusion_proof(leaves, index)
    assert is_included(leaves[index], index, size, proof, root(leaves))
    assert not is_included(leaf_hash(b"another"), index, size, proof, root(leaves))
    other = data.draw(st.integers(0, size - 1))
    if other != index:
        assert not is_included(leaves[index], other, size, proof, root(leaves))


@given(size=st.integers(1, 70), data=st.data())
def test_every_earlier_tree_is_proved_and_a_changed_one_is_not(
    size: int, data: st.DataObject
) -> None:
    leaves = [leaf_hash(bytes([n])) for n in range(size)]
    earlier = data.draw(st.integers(1, size))
    proof = consistency_proof(leaves, earlier)
    assert is_consistent(earlier, size, root(leaves[:earlier]), root(leaves), proof)
    changed = data.draw(st.integers(0, earlier - 1))
    leaves[changed] = leaf_hash(b"changed")
    was = [leaf_hash(bytes([n])) for n in range(earlier)]
    assert not is_consistent(earlier, size, root(was), root(leaves), proof)


def test_a_leaf_or_tree_that_is_not_there_is_refused() -> None:
    with pytest.raises(IndexError):
        inclusion_proof(LEAVES, 8)
    with pytest.raises(IndexError):
        consistency_proof(LEAVES, 9)
    assert not is_included(LEAVES[0], 8, 8, (), root(LEAVES))
    assert not is_consistent(0, 8, root([]), root(LEAVES), ())
    assert not is_consistent(3, 8, root(LEAVES[:3]), root(LEAVES), ())
