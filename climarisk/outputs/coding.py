"""Bytes as prefix codes of their own frequencies, so that a large study stays a small page.

The frequent values of an array take few bits, the rare ones many (Huffman, D. A. (1952), a method
for the construction of minimum-redundancy codes).  A decoder needs the lengths of the codes only:
codes are given out in the order of their lengths and values.  Own code in place of a compression
library, because two versions of such a library may write different bytes for the same input.
"""

from __future__ import annotations

import heapq

import numpy as np

#: The longest code; the page's script keeps a table of this many bits.
LONGEST_CODE = 15
_N_VALUES = 256


def code_lengths(counts: np.ndarray) -> np.ndarray:
    """How many bits the code of each value takes.

    Parameters
    ----------
    counts : ndarray of int, shape (256,)
        How often each value comes.

    Returns
    -------
    ndarray of uint8, shape (256,)
        0 for a value that never comes, else 1 to `LONGEST_CODE`.
    """
    counts = counts.astype(np.int64)
    while True:
        lengths = _lengths(counts)
        if lengths.max(initial=0) <= LONGEST_CODE:
            return lengths
        counts = (counts + 1) // 2  # evener counts give evener codes


def _lengths(counts: np.ndarray) -> np.ndarray:
    lengths = np.zeros(_N_VALUES, np.uint8)
    # The first value of a group breaks ties, so that the codes do not depend on the machine.
    heap = [(int(counts[v]), int(v), [int(v)]) for v in np.flatnonzero(counts)]
    heapq.heapify(heap)
    if len(heap) == 1:
        lengths[heap[0][1]] = 1
    while len(heap) > 1:
        one, other = heapq.heappop(heap), heapq.heappop(heap)
        together = one[2] + other[2]
        lengths[together] += 1
        heapq.heappush(heap, (one[0] + other[0], min(one[1], other[1]), together))
    return lengths


def _codes(lengths: np.ndarray) -> np.ndarray:
    """The code of each value, counted up within a length, the shorter ones first."""
    codes = np.zeros(_N_VALUES, np.int64)
    code, last = 0, 0
    for value in sorted(np.flatnonzero(lengths), key=lambda v: (lengths[v], v)):
        code <<= int(lengths[value]) - last
        last = int(lengths[value])
        codes[value] = code
        code += 1
    return codes


def prefix_coded(values: np.ndarray) -> bytes:
    """Bytes as prefix codes.

    Parameters
    ----------
    values : ndarray of uint8, shape (n,)

    Returns
    -------
    bytes
        ``n`` as four bytes, the lowest first; the lengths of the 256 codes, two in a byte, the
        first in its upper half; then the codes, the first bit of each in the highest free place.
    """
    lengths = code_lengths(np.bincount(values, minlength=_N_VALUES))
    codes = _codes(lengths)
    size = lengths[values].astype(np.int64)
    first = np.cumsum(size) - size
    bits = np.zeros(int(size.sum()), np.uint8)
    for place in range(int(lengths.max(initial=0))):
        there = size > place
        bits[first[there] + place] = (codes[values[there]] >> (size[there] - 1 - place)) & 1
    head = np.array([len(values)], "<u4").tobytes() + (lengths[0::2] << 4 | lengths[1::2]).tobytes()
    return head + np.packbits(bits).tobytes()
