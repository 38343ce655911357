"""The vectorisable logarithm, exponential and arctangent against the mathematics library's."""

import math

import numpy as np
import pytest

from planner.physics._jit import scalar
from planner.physics._lanes import LANES, load, store
from planner.physics.elementary import arcsine, arctangent, exp, log10, power, sine_of_small


def test_log10_is_the_library_s():
    """Over all magnitudes that distances and losses take, and close to 1, where digits are lost."""
    rng = np.random.default_rng(1)
    for x in np.concatenate(
        [10.0 ** rng.uniform(-12, 12, 4000), 1.0 + rng.uniform(-0.3, 0.5, 500)]
    ):
        assert log10(x) == pytest.approx(math.log10(x), rel=4e-12, abs=1e-15)
    assert log10(1.0) == 0.0
    assert math.isnan(log10(math.nan))
    assert log10(math.inf) == math.inf
    for exponent in range(-300, 300, 7):
        assert log10(10.0**exponent) == pytest.approx(exponent, rel=4e-12)


def test_exp_is_the_library_s():
    rng = np.random.default_rng(2)
    for x in np.concatenate([rng.uniform(-700, 700, 3000), rng.uniform(-1, 1, 1000), [0.0]]):
        assert exp(x) == pytest.approx(math.exp(x), rel=4e-12)
    assert math.isnan(exp(math.nan))
    assert exp(-1e9) == pytest.approx(0.0, abs=1e-300)


def test_arctangent_is_the_library_s():
    rng = np.random.default_rng(3)
    steep = np.tan(rng.uniform(-0.5 * math.pi, 0.5 * math.pi, 3000))
    for x in np.concatenate([steep, rng.uniform(-2, 2, 1000), [0.0, 1.0, -1.0, math.inf]]):
        assert arctangent(x) == pytest.approx(math.atan(x), rel=4e-11, abs=1e-15)
    assert math.isnan(arctangent(math.nan))


@pytest.mark.parametrize("function", [log10, exp, arctangent])
def test_compiled_code_is_a_vector_loop(function):
    """What the functions exist for: a loop over them uses packed instructions where it can."""
    import llvmlite.binding
    from numba import njit

    if "x86" not in llvmlite.binding.get_process_triple():
        pytest.skip("looks for the names of x86 instructions")

    @njit(error_model="numpy")
    def over(values, out):
        for i in range(values.size):
            out[i] = function(values[i])

    over(np.ones(3), np.ones(3))
    assembly = next(iter(over.inspect_asm().values()))
    assert "vmulpd" in assembly or "mulpd" in assembly


def over_lanes(function):
    """The function over any number of values, in single lanes."""

    @scalar
    def over(values, out):
        store(out, 0, function(load(values, 0)))

    def call(values):
        values = np.asarray(values, dtype=np.float32)
        padded = np.resize(values, (-(-values.size // LANES), LANES))
        out = np.empty_like(padded)
        for row, result in zip(padded, out, strict=True):
            over(row, result)
        return out.ravel()[: values.size].astype(float), values.astype(float)

    return call


def test_single_lanes_keep_their_digits():
    """As the docstring says: 9e-7 for the logarithm, 1e-6 in relative terms for the exponential."""
    rng = np.random.default_rng(5)
    ours, x = over_lanes(log10)(10.0 ** rng.uniform(-6, 9, 3000))
    # A float32 of 4 to 8 has a step of 5e-7, one of 8 to 9 of 1e-6.
    np.testing.assert_allclose(ours, np.log10(x), rtol=0.0, atol=9e-7)
    ours, x = over_lanes(exp)(rng.uniform(-80, 80, 3000))
    # The argument's own rounding in units of log 2 grows with it.
    np.testing.assert_array_less(np.abs(ours / np.exp(x) - 1.0), 1e-6 + 1e-7 * np.abs(x))
    ours, x = over_lanes(arctangent)(np.concatenate([rng.uniform(-80, 80, 3000), [np.inf, 0.0]]))
    np.testing.assert_allclose(ours, np.arctan(x), rtol=0.0, atol=2e-7)
    ours, x = over_lanes(arcsine)(np.concatenate([rng.uniform(-1, 1, 3000), [1.0, -1.0]]))
    np.testing.assert_allclose(ours, np.arcsin(x), rtol=0.0, atol=2e-7)
    ours, x = over_lanes(sine_of_small)(rng.uniform(-math.pi / 6, math.pi / 6, 3000))
    np.testing.assert_allclose(ours, np.sin(x), rtol=2e-7)
    for function in (log10, exp, arctangent):
        assert np.isnan(over_lanes(function)([math.nan])[0]).all()


def test_power_arcsine_and_sine_are_the_library_s():
    rng = np.random.default_rng(6)
    for x in 10.0 ** rng.uniform(-5, 5, 1000):
        assert power(x, -1.0 / 3.0) == pytest.approx(x ** (-1.0 / 3.0), rel=1e-10)
        assert power(x, 1.425) == pytest.approx(x**1.425, rel=1e-10)
    for x in np.concatenate([rng.uniform(-1, 1, 1000), [-1.0, 0.0, 1.0]]):
        assert arcsine(x) == pytest.approx(math.asin(x), rel=1e-10, abs=1e-15)
        assert sine_of_small(0.52 * x) == pytest.approx(math.sin(0.52 * x), rel=1e-14)
