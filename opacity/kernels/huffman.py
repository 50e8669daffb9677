"""Part of a deflate stream in Huffman codes of its own (RFC 1951, section 3.2.7): literals, and runs of the last byte.

Symbols are literals 0 to 255 and `END` + n for n more of the byte before, which deflate knows as matches of distance 1.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.jit import jit_exact

END = 256
SHORTEST_RUN, LONGEST_RUN = 3, 258
SYMBOLS = END + 1 + LONGEST_RUN
_CODES = 286
_LONGEST_CODE = 15
_LONGEST_CODE_OF_LENGTHS = 7
_ORDER = np.array([16, 17, 18, 0, 8, 7, 9, 6, 10, 5, 11, 4, 12, 3, 13, 2, 14, 1, 15], np.int64)
_RUN_BASE = np.array(
    [3, 4, 5, 6, 7, 8, 9, 10, 11, 13, 15, 17, 19, 23, 27, 31, 35, 43, 51, 59, 67, 83, 99, 115, 131, 163, 195, 227, 258],
    np.int64,
)
_RUN_BITS = np.array([0] * 8 + [bits for bits in range(1, 6) for _ in range(4)] + [0], np.int64)
"""Lengths of matches from code 257 on, and their extra bits (RFC 1951, section 3.2.5)."""
_RUN_CODE = np.searchsorted(_RUN_BASE, np.arange(LONGEST_RUN + 1), side="right") - 1
_TRAILER = 5
"""Bytes of an empty stored part, which leads to a whole byte."""


@jit_exact
def write_symbols(
    symbols: NDArray[np.int16], counts: NDArray[np.int64], out: NDArray[np.uint8], most: int, last: bool
) -> int:
    """Write symbols, whose `counts` (SYMBOLS,) are known, and end at a whole byte; how many bytes, 0 if above `most`.

    `last` marks the end of the stream.  `out` takes `most` + 8 bytes.
    """
    frequencies = np.zeros(_CODES, np.int64)
    frequencies[: END + 1] = counts[: END + 1]
    frequencies[END] = 1
    for run in range(SHORTEST_RUN, LONGEST_RUN + 1):
        frequencies[END + 1 + _RUN_CODE[run]] += counts[END + run]
    lengths = code_lengths(frequencies, _LONGEST_CODE)
    lengths_coded, extra, coded = _lengths_coded(lengths)
    frequencies_of_lengths = np.zeros(19, np.int64)
    for i in range(coded):
        frequencies_of_lengths[lengths_coded[i]] += 1
    lengths_of_lengths = code_lengths(frequencies_of_lengths, _LONGEST_CODE_OF_LENGTHS)
    bits = 3 + 14 + 3 * 19
    for symbol in range(19):
        more = 2 if symbol == 16 else 3 if symbol == 17 else 7 if symbol == 18 else 0
        bits += frequencies_of_lengths[symbol] * (lengths_of_lengths[symbol] + more)
    for symbol in range(_CODES):
        more = _RUN_BITS[symbol - END - 1] + 1 if symbol > END else 0
        bits += frequencies[symbol] * (lengths[symbol] + more)
    if bits // 8 + 1 + _TRAILER > most:
        return 0
    place = _write_head(lengths_coded[:coded], extra, lengths_of_lengths, out, last)
    position, held, count = _write_body(symbols, lengths, out, place)
    if not last:  # an empty stored part: three bits, the rest of a byte, its length and that inverted
        position, held, count = _append(out, (position, held, count), 0, 3)
    if count > 0:
        out[position] = held
        position += 1
    if not last:
        out[position], out[position + 1], out[position + 2], out[position + 3] = 0, 0, 0xFF, 0xFF
        position += 4
    return position


@jit_exact
def code_lengths(frequencies: NDArray[np.int64], longest: int) -> NDArray[np.int64]:
    """Lengths of the Huffman codes of symbols that occur, 0 for others; where one is too long, frequencies are evened.

    A single symbol gets a code of one bit.
    """
    lengths = np.zeros(frequencies.size, np.int64)
    used = np.flatnonzero(frequencies)
    if used.size == 1:
        lengths[used[0]] = 1
    halvings = 0
    while used.size > 1:
        # Sorted with the symbol below the frequency, so that the order is one.
        keys = np.sort((((frequencies[used] - 1) >> halvings) + 1) * frequencies.size + used)
        depths = _depths(keys // frequencies.size)
        if depths.max() <= longest:
            lengths[keys % frequencies.size] = depths
            break
        halvings += 1
    return lengths


@jit_exact
def _depths(weights: NDArray[np.int64]) -> NDArray[np.int64]:
    """Depths in a Huffman tree of leaves whose weights (n,) rise, two or more: joined nodes come in order as well."""
    n = weights.size
    weight = np.empty(2 * n - 1, np.int64)
    weight[:n] = weights
    parent = np.zeros(2 * n - 1, np.int64)
    leaf, joined = 0, n
    for node in range(n, 2 * n - 1):
        total = 0
        for _ in range(2):
            if joined >= node or (leaf < n and weight[leaf] <= weight[joined]):
                lightest = leaf
                leaf += 1
            else:
                lightest = joined
                joined += 1
            total += weight[lightest]
            parent[lightest] = node
        weight[node] = total
    depth = np.zeros(2 * n - 1, np.int64)
    for node in range(2 * n - 3, -1, -1):
        depth[node] = depth[parent[node]] + 1
    return depth[:n]


@jit_exact
def codes_of(lengths: NDArray[np.int64]) -> NDArray[np.int64]:
    """Canonical codes of such lengths (RFC 1951, section 3.2.2), first bit lowest."""
    following = np.zeros(_LONGEST_CODE + 2, np.int64)
    for length in lengths:
        if length:
            following[length + 1] += 1
    for length in range(1, _LONGEST_CODE + 2):
        following[length] = (following[length - 1] << 1) + (following[length] << 1)
    codes = np.zeros(lengths.size, np.int64)
    for symbol in range(lengths.size):
        code = following[lengths[symbol]]
        following[lengths[symbol]] += 1
        for _ in range(lengths[symbol]):
            codes[symbol] = (codes[symbol] << 1) | (code & 1)
            code >>= 1
    return codes


@jit_exact
def _lengths_coded(lengths: NDArray[np.int64]) -> tuple[NDArray[np.int64], NDArray[np.int64], int]:
    """Code lengths, and one bit for the one distance, as symbols of the code of lengths with their extra bits."""
    row = np.ones(lengths.size + 1, np.int64)
    row[: lengths.size] = lengths
    symbols, extra = np.empty(row.size, np.int64), np.zeros(row.size, np.int64)
    number, i = 0, 0
    while i < row.size:
        same = 1
        while i + same < row.size and row[i + same] == row[i] and same < 138:
            same += 1
        if row[i] == 0 and same >= 3:
            symbols[number] = 18 if same >= 11 else 17
            extra[number] = same - (11 if same >= 11 else 3)
        else:
            same = 1
            symbols[number] = row[i]
        i += same
        # Of a length that repeats, three to six more.
        more = 0
        while row[i - 1] and i + more < row.size and row[i + more] == row[i - 1] and more < 6:
            more += 1
        number += 1
        if more >= 3:
            symbols[number], extra[number] = 16, more - 3
            i += more
            number += 1
    return symbols, extra, number


@jit_exact
def _write_head(
    symbols: NDArray[np.int64], extra: NDArray[np.int64], lengths: NDArray[np.int64], out: NDArray[np.uint8], last: bool
) -> tuple[int, int, int]:
    """Everything before the symbols: both codes."""
    place = _append(out, (0, 0, 0), 1 if last else 0, 1)
    place = _append(out, place, 2, 2)
    place = _append(out, place, _CODES - 257, 5)
    place = _append(out, place, 0, 5)
    place = _append(out, place, 19 - 4, 4)
    for symbol in _ORDER:
        place = _append(out, place, lengths[symbol], 3)
    codes = codes_of(lengths)
    for i in range(symbols.size):
        symbol = symbols[i]
        place = _append(out, place, codes[symbol], lengths[symbol])
        if symbol >= 16:
            place = _append(out, place, extra[i], 2 if symbol == 16 else 3 if symbol == 17 else 7)
    return place


@jit_exact
def _write_body(
    symbols: NDArray[np.int16], lengths: NDArray[np.int64], out: NDArray[np.uint8], place: tuple[int, int, int]
) -> tuple[int, int, int]:
    """All symbols and the end of the part."""
    codes = codes_of(lengths)
    bits, sizes = np.zeros(SYMBOLS, np.int64), np.zeros(SYMBOLS, np.int64)
    bits[: END + 1], sizes[: END + 1] = codes[: END + 1], lengths[: END + 1]
    for run in range(SHORTEST_RUN, LONGEST_RUN + 1):
        kind = _RUN_CODE[run]
        code = END + 1 + kind
        bits[END + run] = codes[code] | ((run - _RUN_BASE[kind]) << lengths[code])
        sizes[END + run] = lengths[code] + _RUN_BITS[kind] + 1  # and a zero for the one distance
    position, held, count = place
    for i in range(symbols.size):
        held |= bits[symbols[i]] << count
        count += sizes[symbols[i]]
        while count >= 16:
            out[position], out[position + 1] = held & 0xFF, (held >> 8) & 0xFF
            position, held, count = position + 2, held >> 16, count - 16
    return _append(out, (position, held, count), codes[END], lengths[END])


@jit_exact
def _append(out: NDArray[np.uint8], place: tuple[int, int, int], code: int, bits: int) -> tuple[int, int, int]:
    """Append bits, lowest first; `place` is the next byte, the bits held back, and how many."""
    position, held, count = place
    held |= code << count
    count += bits
    while count >= 8:
        out[position] = held & 0xFF
        position, held, count = position + 1, held >> 8, count - 8
    return position, held, count
