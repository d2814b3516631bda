"""Sun outside the atmosphere and day length, against worked examples in print."""

import math

import numpy as np
import pytest

from server.physics.sky import (
    clear_day_cap,
    day_length_h,
    declination_rad,
    extraterrestrial_kwh_m2,
    orbit_factor,
    sunset_rad,
)

MJ_PER_KWH = 3.6
FAO_SOLAR_CONSTANT_W_M2 = 0.0820e6 / 60.0  # FAO-56 counts 0.0820 MJ/m2 a minute


def test_fao_56_example_8_extraterrestrial_radiation():
    # FAO-56 (1998) example 8, 20° S, 3 September (day 246): dr 0.985, declination 0.120 rad, sunset 1.527 rad,
    # Ra 32.2 MJ/m2. Read in the test file of the public PyETo, tests/test_fao.py. The last digit printed is the
    # tolerance, except the declination: FAO's formula and Cooper's, which is ours, differ by up to 0.002 rad.
    assert orbit_factor(246) == pytest.approx(0.985, abs=0.0005)
    assert declination_rad(246) == pytest.approx(0.120, abs=0.002)
    assert sunset_rad(-20.0, 246) == pytest.approx(1.527, abs=0.001)
    ra_mj_m2 = MJ_PER_KWH * extraterrestrial_kwh_m2(-20.0, 246, FAO_SOLAR_CONSTANT_W_M2)
    assert ra_mj_m2 == pytest.approx(32.2, abs=0.05)


def test_fao_56_example_9_day_length():
    # FAO-56 example 9: the same day has 11.7 h of daylight. Same file.
    assert day_length_h(-20.0, 246) == pytest.approx(11.7, abs=0.05)


def test_fao_56_radiation_at_rio():
    # NCAR Command Language manual, radsol_clrsky_fao56: Rio, 22.9° S, day 135: Ra 25.111 MJ/m2, cloudless 18.833.
    # Printed from FAO's declination; the 0.002 rad between it and Cooper's are worth up to 0.2 % here.
    ra_mj_m2 = MJ_PER_KWH * extraterrestrial_kwh_m2(-22.9, 135, FAO_SOLAR_CONSTANT_W_M2)
    assert ra_mj_m2 == pytest.approx(25.111, rel=0.002)
    assert clear_day_cap(0.0) * ra_mj_m2 == pytest.approx(18.833, rel=0.002)
    assert clear_day_cap(0.0) * 25.111 == pytest.approx(18.833, abs=0.001)


def test_duffie_and_beckman_example_1_10_1():
    # From memory: Duffie & Beckman, example 1.10.1, 43° N, 15 April (day 105): declination 9.4°, sunset 98.9°,
    # H0 33.8 MJ/m2 with 1367 W/m2. Tolerance 0.2 %, and the last digit printed.
    assert np.degrees(declination_rad(105)) == pytest.approx(9.4, abs=0.05)
    assert np.degrees(sunset_rad(43.0, 105)) == pytest.approx(98.9, abs=0.05)
    assert MJ_PER_KWH * extraterrestrial_kwh_m2(43.0, 105, 1367.0) == pytest.approx(33.8, rel=0.002)


def test_equinox_at_the_equator_by_hand():
    # Declination 0 (day 81 of Cooper's formula), sun through the zenith: H0 = 24/pi · 1.361 · E kWh/m2, twelve hours.
    by_hand = 24.0 / math.pi * 1.361 * (1.0 + 0.033 * math.cos(2.0 * math.pi * 81.0 / 365.0))
    assert extraterrestrial_kwh_m2(0.0, 81) == pytest.approx(by_hand, rel=1e-9)
    assert day_length_h(0.0, 81) == pytest.approx(12.0, abs=1e-9)
