"""Values to stored blocks: bytes by significance, in a zlib stream (RFC 1950, 1951), in one pass over each block.

The highest bytes, sign and exponent, come in long runs; they are coded as literals and runs (matches of distance 1) in
Huffman codes made for them.  Each plane of bytes below is noisier than the one above it: from the first that does not
shrink on, planes are stored as they are.  What is made depends on the values alone, and any reader unpacks it.
"""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from opacity.kernels.huffman import END, LONGEST_RUN, SHORTEST_RUN, SYMBOLS, write_symbols
from opacity.kernels.jit import jit_exact

STORED = 65535
"""Bytes in a stored part of a deflate stream at most."""
ZLIB_BYTES = 6
WORTH_IT = 0.95
"""A plane that shrinks to less than this share is coded, others are stored: they are quicker to read."""
SAMPLED = 8
NOISE_BITS = 7.6
"""Bits a byte above which a sample of every 8th byte is taken for noise, unless neighbours are often equal."""
NO_WORD = (1 << 64) - 1
ADLER = 65521
ADLER_AT_ONCE = 5552
"""So many bytes are summed before the remainder is taken; 32 bits would do (RFC 1950)."""


def room_for(chunk: int, size: int) -> int:
    """Bytes that a block of `chunk` values of `size` bytes takes at most."""
    return ZLIB_BYTES + size * (chunk + 5 * (chunk // STORED + 1))


@jit_exact
def pack_rows(words: NDArray[Any], chunk: int, block: int, out: NDArray[np.uint8], ends: NDArray[np.int64]) -> None:
    """Pack rows of values, given as unsigned words (n_row, n), block by block one after the other into `out`.

    A row's last block is filled up to `chunk` words with NaN, whose words are all ones below the sign.  `ends` (number
    of blocks) gets where each block ends; `out` has `room_for` all of them.
    """
    size = words.itemsize
    planes = np.empty((size, chunk), np.uint8)
    coded = np.empty((size, chunk + 16), np.uint8)
    symbols = np.empty(chunk, np.int16)
    position, number = 0, 0
    for row in range(words.shape[0]):
        for start in range(0, words.shape[1], block):
            stop = min(start + block, words.shape[1])
            _part_planes(words[row, start:stop], planes)
            position = _write_block(planes, coded, symbols, out, position)
            ends[number] = position
            number += 1


@jit_exact
def _part_planes(words: NDArray[Any], planes: NDArray[np.uint8]) -> None:
    """Bytes of words by significance, lowest first; the rest of each plane is that of a quiet NaN."""
    size = planes.shape[0]
    for k in range(size):
        plane = planes[k]
        shift = 8 * k
        for i in range(words.size):
            plane[i] = (words[i] >> shift) & 0xFF
        fill = 0x7F if k == size - 1 else (0xC0 if size == 4 else 0xF8) if k == size - 2 else 0
        plane[words.size :] = fill


@jit_exact
def _write_block(
    planes: NDArray[np.uint8],
    coded: NDArray[np.uint8],
    symbols: NDArray[np.int16],
    out: NDArray[np.uint8],
    position: int,
) -> int:
    """Write the zlib stream of a block; where it ends."""
    size = planes.shape[0]
    sizes = np.zeros(size, np.int64)
    for k in range(size - 1, -1, -1):
        if k < size - 1 and _is_noise(planes[k]):
            break
        sizes[k] = _code(planes[k], symbols, coded[k], k == size - 1)
        if sizes[k] == 0:
            break
    out[position], out[position + 1] = 0x78, 0x5E
    position += 2
    for k in range(size):
        if sizes[k] > 0:
            out[position : position + sizes[k]] = coded[k, : sizes[k]]
            position += sizes[k]
        else:
            position = _store(planes[k], out, position, k == size - 1)
    low, high = 1, 0
    for k in range(size):
        low, high = _adler(planes[k], low, high)
    out[position], out[position + 1] = high >> 8, high & 0xFF
    out[position + 2], out[position + 3] = low >> 8, low & 0xFF
    return position + 4


@jit_exact
def _store(plane: NDArray[np.uint8], out: NDArray[np.uint8], position: int, last: bool) -> int:
    """A plane as it is, in stored parts of a deflate stream that starts at a whole byte."""
    for start in range(0, plane.size, STORED):
        length = min(STORED, plane.size - start)
        out[position] = 1 if last and start + length == plane.size else 0
        out[position + 1], out[position + 2] = length & 0xFF, length >> 8
        out[position + 3], out[position + 4] = (~length) & 0xFF, ((~length) >> 8) & 0xFF
        out[position + 5 : position + 5 + length] = plane[start : start + length]
        position += 5 + length
    return position


@jit_exact
def _adler(plane: NDArray[np.uint8], low: int, high: int) -> tuple[int, int]:
    """Both sums of adler32 (RFC 1950), carried on over a plane."""
    for start in range(0, plane.size, ADLER_AT_ONCE):
        piece = plane[start : start + ADLER_AT_ONCE]
        total, weighted = np.uint32(0), np.uint32(0)
        for i in range(piece.size):
            total += np.uint32(piece[i])
            weighted += np.uint32(piece[i]) * np.uint32(i)
        # weighted stays below 255 * 5552^2 / 2 < 2^32.
        high = (high + piece.size * low + piece.size * int(total) - int(weighted)) % ADLER
        low = (low + int(total)) % ADLER
    return low, high


@jit_exact
def _is_noise(plane: NDArray[np.uint8]) -> bool:
    """Whether a sample of bytes is spread over nearly all values, and neighbours are seldom equal."""
    counts = np.zeros(256, np.int64)
    equal, total = 0, 0
    for i in range(0, plane.size - 1, SAMPLED):
        counts[plane[i]] += 1
        equal += plane[i] == plane[i + 1]
        total += 1
    if total < 256 or 16 * equal > total:
        return False
    bits = 0.0
    for count in counts:
        if count:
            bits -= count * math.log2(count / total)
    return bits > NOISE_BITS * total


@jit_exact
def _code(plane: NDArray[np.uint8], symbols: NDArray[np.int16], out: NDArray[np.uint8], last: bool) -> int:
    """Code a plane as literals and runs into `out`, up to a whole byte; the bytes of it, 0 where it does not shrink."""
    counts = np.zeros(SYMBOLS, np.int64)
    size, number, i = plane.size, 0, 0
    while i < size:
        byte = plane[i]
        symbols[number] = byte
        counts[byte] += 1
        number, i = number + 1, i + 1
        first = i
        while i < size and plane[i] == byte:
            i += 1
        rest = i - first
        while rest >= SHORTEST_RUN:
            run = min(rest, LONGEST_RUN)
            symbols[number] = END + run
            counts[END + run] += 1
            number, rest = number + 1, rest - run
        for _ in range(rest):
            symbols[number] = byte
            counts[byte] += 1
            number += 1
    return write_symbols(symbols[:number], counts, out, int(WORTH_IT * size), last)


@jit_exact
def word_range(words: NDArray[np.uint64]) -> tuple[np.uint64, np.uint64]:
    """Smallest word above 0 and largest word of f8 values (n,): the words of doubles at or above 0 rise with them.

    A negative zero counts as 0; where no word is above 0 the smallest is `NO_WORD`.
    """
    none, negative_zero = np.uint64(0), np.uint64(1 << 63)
    smallest, largest = np.uint64(NO_WORD), none
    for i in range(words.size):
        word = none if words[i] == negative_zero else words[i]
        smallest = min(smallest, np.uint64(NO_WORD) if word == none else word)
        largest = max(largest, word)
    return smallest, largest
