"""The vectorisable logarithm, exponential and arctangent against the mathematics library's."""

import math

import numpy as np
import pytest

from planner.physics._jit import in_single_precision
from planner.physics.elementary import arctangent, exp, log10


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
    for power in range(-300, 300, 7):
        assert log10(10.0**power) == pytest.approx(power, rel=4e-12)


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


def test_single_precision_keeps_its_digits():
    """As the docstrings say: 9e-7 for the logarithm, 1e-6 in relative terms for the exponential."""
    rng = np.random.default_rng(5)
    log10_single, exp_single = in_single_precision(log10), in_single_precision(exp)
    arctangent_single = in_single_precision(arctangent)
    for x in 10.0 ** rng.uniform(-6, 9, 3000):
        value = np.float32(x)
        # A float32 of 4 to 8 has a step of 5e-7, one of 8 to 9 of 1e-6.
        assert log10_single(value) == pytest.approx(math.log10(value), abs=9e-7)
    for x in rng.uniform(-80, 80, 3000):
        value = np.float32(x)
        # The argument's own rounding in units of log 2 grows with it.
        assert exp_single(value) == pytest.approx(math.exp(value), rel=1e-6 + 1e-7 * abs(x))
        assert arctangent_single(value) == pytest.approx(math.atan(value), abs=2e-7)
