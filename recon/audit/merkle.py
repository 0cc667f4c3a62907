"""Merkle trees over a growing log: one root stands for all entries, short proofs for one of them.

The tree of RFC 6962 section 2.1 and RFC 9162 section 2.1: leaf hash ``SHA-256(0x00 || entry)``,
node hash ``SHA-256(0x01 || left || right)``, split at the largest power of two below the size. The
first bytes keep a node from being passed off as a leaf.
"""

from __future__ import annotations

import hashlib
from collections.abc import Sequence

Hashes = Sequence[bytes]


def leaf_hash(entry: bytes) -> bytes:
    """Hash of an entry as a leaf."""
    return hashlib.sha256(b"\x00" + entry).digest()


def root(leaves: Hashes) -> bytes:
    """Root of a tree of leaf hashes; of an empty tree the hash of nothing."""
    if not leaves:
        return hashlib.sha256(b"").digest()
    level = list(leaves)
    while len(level) > 1:  # pairing from the left is the RFC's split, an odd one goes up as it is
        paired = [_node(level[i], level[i + 1]) for i in range(0, len(level) - 1, 2)]
        level = paired + ([level[-1]] if len(level) % 2 else [])
    return level[0]


def inclusion_proof(leaves: Hashes, index: int) -> tuple[bytes, ...]:
    """
    Give the hashes that lead from one leaf to the root (RFC 9162, 2.1.3.1).

    Raises
    ------
    IndexError
        No such leaf.
    """
    if not 0 <= index < len(leaves):
        raise IndexError(f"leaf {index} of a tree of {len(leaves)}")
    return tuple(_path(leaves, index))


def is_included(
    leaf: bytes, index: int, size: int, proof: Sequence[bytes], expected_root: bytes
) -> bool:
    """Check that a leaf hash is leaf ``index`` of the tree of that size (RFC 9162, 2.1.3.2)."""
    if not 0 <= index < size:
        return False
    here, last, found = index, size - 1, leaf
    for sibling in proof:
        if last == 0:
            return False
        if here % 2 == 1 or here == last:
            found = _node(sibling, found)
            while here % 2 == 0 and here != 0:
                here, last = here >> 1, last >> 1
        else:
            found = _node(found, sibling)
        here, last = here >> 1, last >> 1
    return last == 0 and found == expected_root


def consistency_proof(leaves: Hashes, earlier: int) -> tuple[bytes, ...]:
    """
    Give the hashes that show the tree of the first ``earlier`` leaves within the whole one.

    RFC 9162, 2.1.4.1.

    Raises
    ------
    IndexError
        ``earlier`` is not between 1 and the size.
    """
    if not 1 <= earlier <= len(leaves):
        raise IndexError(f"a tree of {earlier} within one of {len(leaves)}")
    return tuple(_subproof(leaves, earlier, whole=True))


def is_consistent(
    earlier: int, size: int, earlier_root: bytes, later_root: bytes, proof: Sequence[bytes]
) -> bool:
    """Check that a later tree holds all of an earlier one (RFC 9162, 2.1.4.2)."""
    if not 1 <= earlier <= size:
        return False
    if earlier == size:
        return not proof and earlier_root == later_root
    hashes = list(proof)
    if earlier & (earlier - 1) == 0:
        hashes.insert(0, earlier_root)
    if not hashes:
        return False
    here, last = earlier - 1, size - 1
    while here % 2 == 1:
        here, last = here >> 1, last >> 1
    first = second = hashes[0]
    for sibling in hashes[1:]:
        if last == 0:
            return False
        if here % 2 == 1 or here == last:
            first, second = _node(sibling, first), _node(sibling, second)
            while here % 2 == 0 and here != 0:
                here, last = here >> 1, last >> 1
        else:
            second = _node(second, sibling)
        here, last = here >> 1, last >> 1
    return last == 0 and first == earlier_root and second == later_root


def _node(left: bytes, right: bytes) -> bytes:
    return hashlib.sha256(b"\x01" + left + right).digest()


def _split(size: int) -> int:
    """The largest power of two below a size."""
    return 1 << ((size - 1).bit_length() - 1)


def _path(leaves: Hashes, index: int) -> list[bytes]:
    if len(leaves) == 1:
        return []
    k = _split(len(leaves))
    if index < k:
        return [*_path(leaves[:k], index), root(leaves[k:])]
    return [*_path(leaves[k:], index - k), root(leaves[:k])]


def _subproof(leaves: Hashes, earlier: int, *, whole: bool) -> list[bytes]:
    if earlier == len(leaves):
        return [] if whole else [root(leaves)]
    k = _split(len(leaves))
    if earlier <= k:
        return [*_subproof(leaves[:k], earlier, whole=whole), root(leaves[k:])]
    return [*_subproof(leaves[k:], earlier - k, whole=False), root(leaves[:k])]
