"""Vectors in kernels do lane by lane what numpy does element by element, NaN included."""

import math

import numpy as np
import pytest

from planner.physics._jit import scalar
from planner.physics._lanes import (
    LANES,
    any_lane,
    bits,
    borrowed,
    gather,
    lane_numbers,
    load,
    next_lane,
    of_bits,
    prefetch,
    previous_lane,
    single,
    store,
    where,
    whole,
    wide,
)


def numbers(kind: type, seed: int = 1) -> np.ndarray:
    """Three vectors with ties, zeros, and in floats NaN and infinities at different lanes."""
    rng = np.random.default_rng(seed)
    values = np.round(rng.normal(0.0, 3.0, 3 * LANES), 1).astype(kind)
    values[LANES : LANES + 8] = values[:8]
    values[5] = values[LANES + 5] = 0
    if kind is not np.int32:
        values[3], values[LANES + 4] = np.nan, np.nan
        values[9], values[LANES + 10] = np.inf, -np.inf
    return values


@scalar
def _arithmetic(v, out):
    a, b, c = load(v, 0), load(v, LANES), load(v, 2 * LANES)
    store(out, 0, a + b)
    store(out, LANES, a - 2)
    store(out, 2 * LANES, 3 * b * c)
    a += b
    a *= c
    a -= 1
    store(out, 3 * LANES, a)


@scalar
def _choices(v, out):
    a, b = load(v, 0), load(v, LANES)
    store(out, 0, max(a, b))
    store(out, LANES, min(a, b))
    store(out, 2 * LANES, where((a < b) | (a >= 2), a, b))
    store(out, 3 * LANES, where(~(a == b) & (b != 1), b, 7))


@pytest.mark.parametrize("kind", [np.float32, np.float64, np.int32])
def test_arithmetic_and_choices(kind):
    v = numbers(kind)
    a, b, c = v.reshape(3, LANES)
    out = np.zeros(4 * LANES, dtype=kind)
    with np.errstate(invalid="ignore"):
        _arithmetic(v, out)
        expected = [a + b, a - 2, 3 * b * c, (a + b) * c - 1]
        for got, wanted in zip(out.reshape(4, LANES), expected, strict=True):
            np.testing.assert_allclose(got, wanted, rtol=1e-6)
        _choices(v, out)
        # The second one where they do not compare: also where the first is NaN.
        expected = [
            np.where(a > b, a, b),
            np.where(a < b, a, b),
            np.where((a < b) | (a >= 2), a, b),
            np.where(~(a == b) & (b != 1), b, 7),
        ]
        for got, wanted in zip(out.reshape(4, LANES), expected, strict=True):
            np.testing.assert_array_equal(got, wanted)


@scalar
def _real(v, out):
    a, b = load(v, 0), load(v, LANES)
    store(out, 0, a / b)
    store(out, LANES, math.sqrt(abs(a)))
    store(out, 2 * LANES, math.floor(a))
    store(out, 3 * LANES, where(a <= b, -a, math.nan))


@pytest.mark.parametrize("kind", [np.float32, np.float64])
def test_real_numbers(kind):
    v = numbers(kind)
    a, b = v[:LANES], v[LANES : 2 * LANES]
    out = np.zeros(4 * LANES, dtype=kind)
    _real(v, out)
    with np.errstate(invalid="ignore", divide="ignore"):
        expected = [a / b, np.sqrt(np.abs(a)), np.floor(a), np.where(a <= b, -a, np.nan)]
    for got, wanted in zip(out.reshape(4, LANES), expected, strict=True):
        np.testing.assert_allclose(got, wanted, rtol=1e-6)


@scalar
def _conversions(v, w, n, out_single, out_wide, out_whole):
    a, b, i = load(v, 0), load(w, 0), load(n, 0)
    store(out_single, 0, single(b))
    store(out_single, LANES, single(i))
    store(out_wide, 0, wide(a))
    store(out_wide, LANES, wide(i))
    store(out_whole, 0, whole(a))
    store(out_whole, LANES, (i << 3) + (i >> 1) + (i & 5))
    store(out_whole, 2 * LANES, bits(a))
    store(out_single, 2 * LANES, of_bits(bits(a)))


def test_conversions():
    v, w = np.linspace(-40.5, 40.5, LANES, dtype=np.float32), np.linspace(-7.3, 9.1, LANES)
    n = np.arange(-16, 16, dtype=np.int32)
    out_single, out_wide = np.zeros(3 * LANES, np.float32), np.zeros(3 * LANES)
    out_whole = np.zeros(3 * LANES, np.int32)
    _conversions(v, w, n, out_single, out_wide, out_whole)
    np.testing.assert_array_equal(out_single, np.concatenate([w.astype(np.float32), n, v]))
    np.testing.assert_array_equal(out_wide[: 2 * LANES], np.concatenate([v, n]))
    expected = np.concatenate([np.trunc(v), (n << 3) + (n >> 1) + (n & 5), v.view(np.int32)])
    np.testing.assert_array_equal(out_whole, expected)


@scalar
def _places(flat, index, out):
    own = borrowed(flat)
    prefetch(own, 3)
    store(out, 0, gather(own, 2, load(index, 0) * 2))
    loaded = load(own, 7)  # from any element on
    store(out, LANES, next_lane(loaded))
    store(out, 2 * LANES, previous_lane(loaded))
    store(out, 3 * LANES, single(lane_numbers()))
    return any_lane(loaded > 8.5)


def test_places():
    flat = np.random.default_rng(2).uniform(0.0, 8.0, 200).astype(np.float32)
    index = np.random.default_rng(3).integers(0, 99, LANES).astype(np.int32)
    out = np.zeros(4 * LANES, np.float32)
    assert not _places(flat, index, out)
    lanes = np.arange(LANES)
    expected = [
        flat[2 + 2 * index],
        flat[7 + np.minimum(lanes + 1, LANES - 1)],
        flat[7 + np.maximum(lanes - 1, 0)],
        lanes,
    ]
    np.testing.assert_array_equal(out, np.concatenate(expected).astype(np.float32))
    flat[7 + LANES] = 9.0  # one beyond the vector
    assert not _places(flat, index, out)
    flat[7 + LANES - 1] = 9.0
    assert _places(flat, index, out)
