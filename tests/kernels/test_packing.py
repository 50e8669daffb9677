"""What the packing kernel writes is what zlib and HDF5's own filters read, whatever the values."""

from __future__ import annotations

import zlib
from collections.abc import Callable
from pathlib import Path
from typing import Any

import h5py
import numpy as np
import pytest
from numpy.typing import NDArray

from opacity.kernels.huffman import code_lengths, codes_of
from opacity.kernels.packing import NO_WORD, room_for, word_range
from opacity.tables.blocks import pack_block, pack_rows_of, unpack_block
from opacity.tables.layout import sha256_of

Values = NDArray[Any]


def random_bits(rng: np.random.Generator, n: int, dtype: str) -> Values:
    return np.frombuffer(rng.bytes(n * np.dtype(dtype).itemsize), dtype)


def lines_of_all_heights(rng: np.random.Generator, n: int, dtype: str) -> Values:
    """Smooth over some points, as spectra are."""
    places = np.arange(0, n + 40, 40)
    return (10.0 ** np.interp(np.arange(n), places, rng.uniform(-30, -18, places.size))).astype(dtype)


def denormals(rng: np.random.Generator, n: int, dtype: str) -> Values:
    return rng.integers(0, 5, n).astype(f"u{np.dtype(dtype).itemsize}").view(dtype)


def gaps(rng: np.random.Generator, n: int, dtype: str) -> Values:
    values = lines_of_all_heights(rng, n, dtype)
    values[n // 3 : n // 2] = 0.0
    values[n // 2 : n // 2 + 7] = np.nan
    return values


def fibonacci(rng: np.random.Generator, n: int, dtype: str) -> Values:
    """Bytes in such proportions that Huffman codes are as long as they can be."""
    counts = [1, 1]
    while sum(counts) + counts[-1] + counts[-2] <= n:
        counts.append(counts[-1] + counts[-2])
    plane = np.resize(rng.permutation(np.repeat(np.arange(len(counts)), counts)), n).astype(np.uint64)
    kind = np.dtype(dtype)
    words = np.zeros(n, np.uint64)
    for k in range(kind.itemsize):
        words |= plane << np.uint64(8 * k)
    return words.astype(f"u{kind.itemsize}").view(kind)


def same(rng: np.random.Generator, n: int, dtype: str) -> Values:
    return np.full(n, rng.uniform(), dtype)


def alternating(rng: np.random.Generator, n: int, dtype: str) -> Values:
    """No byte equals its neighbour."""
    return np.resize(np.array([1e-20, 2.3e-30, 7.1e-12], dtype), n)


KINDS = [random_bits, lines_of_all_heights, denormals, gaps, fibonacci, same, alternating]


@pytest.mark.parametrize("dtype", ["<f4", "<f8"])
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.nojit
def test_zlib_reads_what_is_packed(kind: Callable[..., Values], dtype: str) -> None:
    """Both the bytes, sorted by significance, and the values, with the fill of a short block."""
    rng = np.random.default_rng(11)
    for n, chunk in ((1, 1), (2, 2), (1, 5), (300, 300), (257, 400), (3000, 3000)):
        values = kind(rng, n, dtype)
        stored = pack_block(values, chunk)
        whole = np.concatenate([values, np.full(chunk - n, np.nan, dtype)])
        planes = np.ascontiguousarray(whole.view(np.uint8).reshape(chunk, -1).T).tobytes()
        reader = zlib.decompressobj()
        assert reader.decompress(stored) == planes
        assert reader.eof
        assert not reader.unused_data
        assert len(stored) <= room_for(chunk, values.itemsize)
        np.testing.assert_array_equal(unpack_block(stored, n, np.dtype(dtype)).view(np.uint8), values.view(np.uint8))


@pytest.mark.parametrize("dtype", ["<f4", "<f8"])
@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("n", [16384, 70000, 140001])
def test_hdf5_reads_what_is_packed(tmp_path: Path, kind: Callable[..., Values], dtype: str, n: int) -> None:
    """By its own filters, in chunks that need one stored part a plane, two and three."""
    values = kind(np.random.default_rng(n), n, dtype)
    with h5py.File(tmp_path / "a.h5", "w") as file:
        stored = file.create_dataset("a", (n,), dtype, chunks=(n,), compression="gzip", shuffle=True)
        stored.id.write_direct_chunk((0,), pack_block(values, n))
    with h5py.File(tmp_path / "a.h5") as file:
        np.testing.assert_array_equal(file["a"][()].view(np.uint8), values.view(np.uint8))


@pytest.mark.nojit
def test_rows_are_packed_as_their_blocks_are() -> None:
    rng = np.random.default_rng(5)
    rows = np.array([lines_of_all_heights(rng, 700, "<f4") for _ in range(3)])
    blocks = pack_rows_of(rows, 300, 300)
    expected = [pack_block(row[first : first + 300], 300) for row in rows for first in (0, 300, 600)]
    assert [bytes(one) for one in blocks] == expected


def test_size_is_near_that_of_deflate() -> None:
    """Of spectra, where deflate at the level that HDF5 is told shrinks every plane as well as it can."""
    values = lines_of_all_heights(np.random.default_rng(2), 16384, "<f4")
    planes = np.ascontiguousarray(values.view(np.uint8).reshape(-1, 4).T).tobytes()
    assert len(pack_block(values, 16384)) < 1.03 * len(zlib.compress(planes, 4))


@pytest.mark.nojit
def test_codes_are_complete_and_no_shorter_than_entropy() -> None:
    """Kraft's sum is 1, no code is longer than allowed, and the mean length is within a bit of the entropy."""
    rng = np.random.default_rng(3)
    for symbols, longest in ((2, 7), (19, 7), (286, 15), (40, 15)):
        counts = np.maximum(np.exp(rng.uniform(-2.0, 12.0, symbols)).astype(np.int64) - 1, 0)
        counts[:2] = 1, 70000
        lengths = code_lengths(counts, longest)
        used = counts > 0
        assert lengths[~used].max(initial=0) == 0
        assert lengths.max() <= longest
        assert np.sum(2.0 ** -lengths[used].astype(float)) == 1.0
        shares = counts[used] / counts.sum()
        entropy = -np.sum(shares * np.log2(shares))
        # A limit of 7 bits costs something where frequencies differ most.
        assert entropy <= np.sum(shares * lengths[used]) < entropy + 1.0
        codes = {(int(n), int(c)) for n, c in zip(lengths[used], codes_of(lengths)[used], strict=True)}
        assert len(codes) == used.sum()


@pytest.mark.nojit
def test_smallest_and_largest_by_words() -> None:
    tiny = float(np.finfo(float).smallest_subnormal)
    for values, smallest, largest in (
        ([0.0, -0.0, 3.0, 1e-300, 2.0], 1e-300, 3.0),
        ([tiny, 0.0], tiny, tiny),
        ([1.0, np.inf], 1.0, np.inf),
    ):
        found = np.array(word_range(np.array(values).view(np.uint64)), np.uint64).view(float)
        assert found.tolist() == [smallest, largest]
    assert word_range(np.array([0.0, -0.0]).view(np.uint64)) == (NO_WORD, 0)
    for bad in (-1.0, np.nan, -np.inf):
        _, word = word_range(np.array([1.0, bad]).view(np.uint64))
        assert not float(np.array([word], np.uint64).view(float)[0]) >= 0.0


@pytest.mark.nojit
def test_damaged_blocks_are_refused() -> None:
    values = lines_of_all_heights(np.random.default_rng(1), 500, "<f4")
    stored = pack_block(values, 500)
    for place in range(0, len(stored), 37):
        spoilt = bytearray(stored)
        spoilt[place] ^= 4
        try:
            found = unpack_block(bytes(spoilt), 500, values.dtype)
        except ValueError:
            continue
        assert sha256_of(found) == sha256_of(values)  # a bit that says nothing
    with pytest.raises(ValueError, match="500 values instead of 501"):
        unpack_block(stored, 501, values.dtype)
