"""Cell and air temperature, against figures in print."""

import numpy as np
import pytest

from server.physics.climate import (
    MOUNTINGS,
    PARTON_LOGAN,
    AirCurve,
    Plane,
    faiman_c,
    harmonic_air_c,
    king_cell_c,
    king_module_c,
    ross_c,
    sine_decay_air_c,
)

# Read in pvlib-python, tests/test_temperature.py: light W/m2, air °C (, wind m/s), cell or module °C.
ROSS_NOCT_50 = [(1000, 30, 67.5), (800, 20, 50.0), (700, 30, 56.25)]
FAIMAN = [(900, 20, 5, 35.203), (500, 10, 5, 18.446), (0, 0, 10, 0.0)]
KING_OPEN_RACK = (-3.47, -0.0594, 3.0)
KING = [(900, 20, 5, 40.809, 43.509), (500, 10, 5, 21.561, 23.061)]


@pytest.mark.parametrize(("poa_w_m2", "air_c", "printed_c"), ROSS_NOCT_50)
def test_ross_gives_the_noct_rise(poa_w_m2, air_c, printed_c):
    assert ross_c(poa_w_m2, air_c, 50.0) == pytest.approx(printed_c, abs=1e-9)
    assert Plane(0, 180, noct_c=50.0).cell_c(poa_w_m2, air_c) == pytest.approx(printed_c, abs=1e-9)


@pytest.mark.parametrize(("poa_w_m2", "air_c", "wind_m_s", "printed_c"), FAIMAN)
def test_faiman_is_the_default_mounting(poa_w_m2, air_c, wind_m_s, printed_c):
    assert faiman_c(poa_w_m2, air_c, wind_m_s) == pytest.approx(printed_c, abs=0.001)
    assert Plane(0, 180, wind_m_s=wind_m_s).cell_c(poa_w_m2, air_c) == pytest.approx(printed_c, abs=0.001)


@pytest.mark.parametrize(("poa_w_m2", "air_c", "wind_m_s", "module_c", "cell_c"), KING)
def test_king_module_and_cell(poa_w_m2, air_c, wind_m_s, module_c, cell_c):
    a, b, front_to_back_k = KING_OPEN_RACK
    assert king_module_c(poa_w_m2, air_c, wind_m_s, a, b) == pytest.approx(module_c, abs=0.002)
    assert king_cell_c(poa_w_m2, air_c, wind_m_s, a, b, front_to_back_k) == pytest.approx(cell_c, abs=0.002)


def test_mounting_constants_are_those_pvlib_quotes_from_king():
    printed = pytest.importorskip("pvlib.temperature").TEMPERATURE_MODEL_PARAMETERS["sapm"]
    for ours, theirs in (
        ("roof_gap", "close_mount_glass_glass"),
        ("flat_insulated", "insulated_back_glass_polymer"),
    ):
        assert MOUNTINGS[ours].king == tuple(printed[theirs][key] for key in ("a", "b", "deltaT"))


def test_sine_and_decay_with_wann_constants():
    # Read in the test file of the R package TrenchR (diurnal_temp_variation_sineexp): maximum 30, minimum 10 °C,
    # sunrise 6, sunset 18, alpha 2.59, beta 1.55, gamma 2.2; at 11 h 23.91954 °C.
    wann = AirCurve(maximum_lag_h=2.59, minimum_lag_h=1.55, decay=2.2, decays_until_minimum=True)
    assert sine_decay_air_c(11.0, 12.0, 10.0, 30.0, wann) == pytest.approx(23.91954, abs=0.001)


def test_sine_and_decay_with_parton_and_logan_constants_in_the_same_form():
    # Constants read there (Colorado: 1.86, -0.17, 2.20), values from the textbook equation by a separate program.
    colorado = AirCurve(maximum_lag_h=1.86, minimum_lag_h=-0.17, decay=2.20, decays_until_minimum=True)
    hours = np.array([11.0, 13.86, 18.0, 22.0, 2.0, 5.0])
    expected_c = [26.951, 30.000, 23.792, 16.555, 13.115, 11.783]
    assert sine_decay_air_c(hours, 12.0, 10.0, 30.0, colorado) == pytest.approx(expected_c, abs=0.002)


def test_parton_and_logan_own_form_by_hand():
    # Day of 12 h: minimum at 5.83 h; sine argument pi·m/(12 + 3.72), so the maximum comes at 5.83 + 7.86 = 13.69 h.
    assert sine_decay_air_c(13.69, 12.0, 10.0, 30.0, PARTON_LOGAN) == pytest.approx(30.0, abs=1e-9)
    assert sine_decay_air_c(5.83 + 7.86 / 3.0, 12.0, 10.0, 30.0) == pytest.approx(20.0, abs=1e-9)  # sine of 30°
    sunset_k = 20.0 * np.sin(np.pi * 12.17 / 15.72)
    assert sine_decay_air_c(0.0, 12.0, 10.0, 30.0) == pytest.approx(10.0 + sunset_k * np.exp(-1.1), abs=1e-9)


def test_two_harmonics_a_day():
    # Read in the same test file: W = 0.44 - 0.46 sin(0.9 + wt) + 0.11 sin(0.9 + 2wt), 30 and 10 °C, 11 h: 25.08958 °C.
    ours_c = harmonic_air_c(11.0, 10.0, 30.0, mean=0.44, first=-0.46, second=0.11, phase_rad=0.9)
    assert ours_c == pytest.approx(25.08958, abs=1e-4)
