"""Cutting named things into blocks that one thing more or less leaves alone."""

from collections.abc import Sequence
from hashlib import sha256

_BITS = 64


def cut_blocks(names: Sequence[str], most: int) -> list[list[int]]:
    """Blocks of at most `most` positions in `names`, each position in one block.

    A name's hash alone decides where it goes: hashes are halved by their leading bits until each part is small enough
    (a trie, as in Fagin, Nievergelt, Pippenger and Strong 1979, Extendible hashing, ACM TODS 4(3), from memory). So
    neither the order of the names nor a name more or less changes any block but its own; on average a block is filled
    to ln 2. The order within a block is that of the hashes.

    >>> sorted(sum(cut_blocks(["S-1", "S-2", "S-3", "S-4", "S-5"], 2), []))
    [0, 1, 2, 3, 4]
    """
    keys = [int.from_bytes(sha256(name.encode()).digest()[: _BITS // 8]) for name in names]
    blocks: list[list[int]] = []
    waiting = [(sorted(range(len(names)), key=lambda row: (keys[row], names[row])), _BITS)]
    while waiting:
        rows, bits = waiting.pop()
        if len(rows) <= most or bits == 0:
            blocks += [rows[i : i + most] for i in range(0, len(rows), most)]
            continue
        ones = [row for row in rows if keys[row] >> (bits - 1) & 1]
        zeros = [row for row in rows if not keys[row] >> (bits - 1) & 1]
        waiting += [(ones, bits - 1), (zeros, bits - 1)]
    return blocks


def restore_order(blocks: Sequence[Sequence[int]]) -> list[int]:
    """Where each position's result stands once the results of the blocks are put one after the other.

    >>> results = ["c", "a", "b"]
    >>> [results[place] for place in restore_order([[2, 0], [1]])]
    ['a', 'b', 'c']
    """
    places = {row: place for place, row in enumerate(row for block in blocks for row in block)}
    return [places[row] for row in range(len(places))]
