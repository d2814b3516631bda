"""Heat paths and thermal runaway against figures in print. READ: inputs and result seen; READ-IN: inputs seen."""

import math

import pytest

from server.physics import thermal
from server.physics.thermal import ExponentialLoss


def test_leakage_that_runs_away_half_the_time_in_reverse():
    # READ: STMicroelectronics AN869 rev 2, first example: 15 V, half the time, 1.6 + 8.5 K/W, 0.055 /K, 210 mA at
    # 125 °C. The note prints 242 mA; exact arithmetic gives 240.0 mA and 127.4 °C.
    limit = thermal.leakage_limit_a(15.0, 0.5, 0.055, 1.6 + 8.5)
    assert limit == pytest.approx(0.2400, rel=0.01)
    assert limit == pytest.approx(0.242, rel=0.01)
    assert thermal.tipping_c(limit, 0.210, 125.0, 0.055) == pytest.approx(127.4, abs=0.3)


def test_leakage_that_runs_away_when_blocking_all_the_time():
    # READ-IN: the same part, always in reverse.
    limit = thermal.leakage_limit_a(15.0, 1.0, 0.055, 10.1)
    assert limit == pytest.approx(0.1200, rel=0.005)
    assert thermal.tipping_c(limit, 0.210, 125.0, 0.055) == pytest.approx(114.8, abs=0.3)


def test_growth_and_doubling_interval_are_one_thing():
    # READ: R. Stout (ON Semiconductor), Predicting thermal runaway part 2: doubling each 10 °C is ln2/10; AN869's
    # 0.055 /K doubles in 12.60 K.
    assert thermal.growth_per_k(1.0, 0.0, 2.0, 10.0) == pytest.approx(0.06931, rel=1e-3)
    assert thermal.tipping_c(2.0, 1.0, 0.0, 0.055) == pytest.approx(12.60, rel=1e-3)


# READ-IN: datasheet pairs; lambda and doubling interval recomputed from the exponential law.
PAIRS = [
    ("STPS10L25D, Ed 3B June 1999", 0.80e-3, 25, 260e-3, 125, 0.05784, 11.98),
    ("STPS10L40C", 0.2e-3, 25, 25e-3, 100, 0.06438, 10.77),
    ("STPS2L25", 90e-6, 25, 30e-3, 125, 0.05809, 11.93),
    ("STTH1L06", 1e-6, 25, 75e-6, 150, 0.03454, 20.07),
]


@pytest.mark.parametrize(("sheet", "i1", "t1", "i2", "t2", "growth", "doubling"), PAIRS, ids=lambda x: str(x)[:14])
def test_growth_between_two_printed_leakages(sheet, i1, t1, i2, t2, growth, doubling):
    ours = thermal.growth_per_k(i1, t1, i2, t2)
    assert ours == pytest.approx(growth, rel=0.005)
    assert thermal.tipping_c(2.0, 1.0, 0.0, ours) == pytest.approx(doubling, rel=0.005)


def test_a_fixed_ten_degree_rule_overstates_an_ultrafast_diode_77_fold():
    # READ-IN: STTH1L06: 75 uA at 150 °C; the 10 K rule from 1 uA at 25 °C says 2^12.5.
    by_rule = 1e-6 * math.exp(thermal.growth_per_k(1, 0, 2, 10) * 125)
    assert by_rule / 75e-6 == pytest.approx(77, rel=0.01)


def test_the_classic_doubling_example():
    # READ: 250 uA at 25 °C, doubling each 10 K: 500 uA at 35 °C and 8.0 mA at 75 °C (germanium 2AP1, trade page).
    growth = thermal.growth_per_k(250e-6, 25, 500e-6, 35)
    assert thermal.tipping_c(8.0e-3, 250e-6, 25, growth) == pytest.approx(75.0, abs=1e-9)


def test_stability_slope_against_a_heatsink():
    # READ criterion, ST Schottky sheets: dPtot/dTj < 1/Rth; READ-IN: 25 V × 260 mA × 0.05784 /K allows 2.660 K/W.
    growth = thermal.growth_per_k(0.80e-3, 25, 260e-3, 125)
    assert thermal.leakage_limit_a(25.0, 1.0, growth, 2.660) == pytest.approx(0.260, rel=0.005)


# READ-IN: P(T) = 25 V × 0.8 mA × exp(0.057838 (T − 25)); Rth, ambient, stable Tj, critical Tj, critical ambient.
EQUILIBRIA = [
    (60, 25, 26.293, 71.12, 53.84),
    (60, 40, 43.498, 71.12, 53.84),
    (60, 50, 58.175, 71.12, 53.84),
    (20, 50, 51.895, 90.12, 72.83),
    (10, 50, 50.894, 102.10, 84.81),
    (5, 50, 50.435, 114.09, 96.80),
]


@pytest.mark.parametrize(("rth", "ambient", "stable", "critical", "critical_ambient"), EQUILIBRIA)
def test_self_heating_equilibrium_and_its_critical_point(rth, ambient, stable, critical, critical_ambient):
    loss = ExponentialLoss(25 * 0.8e-3, 0.057838, rth)
    assert loss.stable_c(ambient) == pytest.approx(stable, abs=0.02)
    assert loss.critical_junction_c == pytest.approx(critical, abs=0.05)
    assert loss.critical_ambient_c == pytest.approx(critical_ambient, abs=0.05)


def test_above_the_critical_ambient_there_is_no_stable_point_and_no_number():
    assert ExponentialLoss(25 * 0.8e-3, 0.057838, 60).stable_c(53.9) is None


def test_heatsink_for_five_watts():
    # READ: slide set 5191918: 5 W, RJC 3, RCS 1, 150 and 50 °C: at most 16.0 K/W; 13.2 K/W passes at 136.0 °C.
    assert thermal.sink_needed_c_per_w(150, 50, 5, 3, 1) == pytest.approx(16.0)
    assert thermal.junction_c(50, 5, 3, 1, 13.2) == pytest.approx(136.0)


def test_heatsink_for_4_7_watts():
    # READ: header of a public heat-sink calculator: 4.7 W, 100 and 50 °C, 4 and 0.5 K/W: Rja 10.64, RSA 6.14.
    assert thermal.sink_needed_c_per_w(100, 50, 4.7, 4, 0.5) == pytest.approx(6.14, rel=1e-3)
    assert thermal.sink_needed_c_per_w(100, 50, 4.7, 0, 0) == pytest.approx(10.64, rel=1e-3)


# READ: 1.89 V × 1.53 A at 25 °C in free air and on two sinks (hobby-electronics thread).
@pytest.mark.parametrize(("path", "expected"), [((40,), 140.668), ((3, 26), 108.859), ((3, 16), 79.942)])
def test_junction_temperature_in_three_mountings(path, expected):
    assert thermal.junction_c(25, 1.89 * 1.53, *path) == pytest.approx(expected, abs=1e-3)


def test_junction_temperature_direct():
    # READ: e2e.ti.com thread 364255: 2 W × 20 K/W + 25.
    assert thermal.junction_c(25, 2, 20) == 65.0


def test_junction_temperature_with_and_without_a_sink():
    # READ: newsletter archive: 3.5 W: 65 K/W gives 252.5 °C, 5 + 1 + 10 K/W gives 81 °C.
    assert thermal.junction_c(25, 3.5, 65) == pytest.approx(252.5)
    assert thermal.junction_c(25, 3.5, 5, 1, 10) == pytest.approx(81.0)


@pytest.mark.parametrize(("ambient", "power"), [(25, 1.5), (75, 1.0)])
def test_linear_power_derating(ambient, power):
    # READ: textbook example 3.11: Tj max 175 °C, 0.1 K/mW.
    assert thermal.derated_power_w(175, ambient, 100.0) == pytest.approx(power)
