"""Link budget and thermal noise."""

import math

import numpy as np
import pytest

from planner.physics.link import (
    eirp_dbm,
    eirp_dbm_scalar,
    received_signal_dbm,
    received_signal_dbm_scalar,
    thermal_noise_dbm,
    thermal_noise_dbm_scalar,
)

# Bandwidth MHz, noise figure dB, noise dBm: 10log10(k 290 K B) + F with k = 1.380649e-23 J/K
# (SI Brochure, 9th edition); exact evaluations, printed to 0.0001 dB.
NOISE = (
    (1e-6, 0.0, -173.9752),  # 1 Hz: the usual -174 dBm/Hz
    (0.18, 5.0, -116.4225),
    (1.0, 0.0, -113.9752),
    (20.0, 7.0, -93.9649),
    (100.0, 9.0, -84.9752),
    (250.0, 5.0, -84.9958),
)

# Transmit power dBm, transmit dBi, receive dBi, other loss dB, free-space loss dB (ITU-R P.525,
# exact constant), received dBm: three free-space budgets at 5.8 GHz over 10 km, 11 GHz over
# 20 km and 80 GHz over 2 km, worked by hand.
BUDGETS = (
    (23.0, 28.0, 28.0, 2.0, 127.7163, -50.7163),
    (27.0, 38.0, 38.0, 3.0, 139.2962, -39.2962),
    (15.0, 50.0, 50.0, 1.5, 136.5302, -23.0302),
)


def received(**changed: object) -> float:
    given: dict[str, object] = {
        "transmit_power_dbm": 19.0,
        "feeder_loss_db": 1.0,
        "antenna_gain_dbi": 17.0,
        "path_loss_db": 120.0,
        "terminal_gain_dbi": 19.0,
        "terminal_feeder_loss_db": 0.5,
    }
    return received_signal_dbm(**(given | changed))


@pytest.mark.parametrize(("bandwidth_mhz", "noise_figure_db", "noise_dbm"), NOISE)
def test_noise_table(bandwidth_mhz: float, noise_figure_db: float, noise_dbm: float) -> None:
    """Thermal noise agrees with the table to the printed digits."""
    actual = thermal_noise_dbm(bandwidth_mhz, noise_figure_db=noise_figure_db)
    assert noise_dbm == pytest.approx(actual, abs=5.1e-5)


@pytest.mark.parametrize(("power", "gain", "terminal", "loss", "path", "signal"), BUDGETS)
def test_budgets(
    power: float, gain: float, terminal: float, loss: float, path: float, signal: float
) -> None:
    """Worked budgets come out to the printed digits."""
    actual = received(
        transmit_power_dbm=power,
        feeder_loss_db=loss,
        antenna_gain_dbi=gain,
        path_loss_db=path,
        terminal_gain_dbi=terminal,
        terminal_feeder_loss_db=0.0,
    )
    assert signal == pytest.approx(actual, abs=1e-9)


def test_eirp_by_hand() -> None:
    """19 dBm behind 1 dB of feeder into 17 dBi radiate 35 dBm."""
    actual = eirp_dbm(transmit_power_dbm=19.0, feeder_loss_db=1.0, antenna_gain_dbi=17.0)
    assert actual == 35.0


@pytest.mark.parametrize(
    ("key", "change_db"),
    [
        ("transmit_power_dbm", 3.0),
        ("antenna_gain_dbi", 3.0),
        ("terminal_gain_dbi", 3.0),
        ("feeder_loss_db", -3.0),
        ("path_loss_db", -3.0),
        ("terminal_feeder_loss_db", -3.0),
    ],
)
def test_every_term_counts_once(key: str, change_db: float) -> None:
    """3 dB more of a gain adds 3 dB; 3 dB more of a loss takes 3 dB away."""
    base = {
        "transmit_power_dbm": 19.0,
        "feeder_loss_db": 1.0,
        "antenna_gain_dbi": 17.0,
        "path_loss_db": 120.0,
        "terminal_gain_dbi": 19.0,
        "terminal_feeder_loss_db": 0.5,
    }
    assert change_db == pytest.approx(received(**{key: base[key] + 3.0}) - received(), abs=1e-12)


def test_nan_and_shapes() -> None:
    """NaN in one cell stays in that cell; arguments broadcast."""
    loss = np.array([[120.0, np.nan], [130.0, 140.0]])
    actual = received(path_loss_db=loss, antenna_gain_dbi=np.array([17.0, 10.0]))
    expected = np.array([[-66.5, np.nan], [-76.5, -93.5]])
    np.testing.assert_allclose(expected, np.round(actual, 9))
    noise = thermal_noise_dbm(np.array([np.nan, 1.0, np.nan, 20.0, 1.0]))
    assert np.isnan(noise).tolist() == [True, False, True, False, False]


@pytest.mark.parametrize("bandwidth_mhz", [0.0, -1.0])
def test_noise_of_no_bandwidth_is_nan(bandwidth_mhz: float) -> None:
    """There is no noise level without a bandwidth."""
    assert math.isnan(thermal_noise_dbm(bandwidth_mhz))


def test_plain_and_compiled_agree() -> None:
    """The scalar formulas give the same compiled and as plain Python."""
    for formula, arguments in (
        (eirp_dbm_scalar, (19.0, 1.0, 17.0)),
        (received_signal_dbm_scalar, (35.0, 123.4, 19.0, 0.5)),
        (thermal_noise_dbm_scalar, (20.0, 5.0)),
    ):
        assert formula.py_func(*arguments) == pytest.approx(formula(*arguments), rel=1e-15)
