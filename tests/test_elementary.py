"""The vectorisable logarithm, exponential and arctangent against the mathematics library's."""

import math

import numpy as np
import pytest

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
