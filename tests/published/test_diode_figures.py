"""Figures taken from print, for the fitted diode: leakage growth, drops, loss, and the physics behind the law."""

import numpy as np
import pytest

from server.catalog.datasheet import ForwardPoint, ReversePoint
from server.catalog.fit import fit_points
from server.physics.diode import (
    ActiveLaw,
    DiodeCells,
    JunctionLaw,
    current_a,
    forward_drop_v,
    reverse_a,
    saturation_a,
)

K_OVER_Q = 8.617333e-5


def at(quantity, law, x, junction_c):
    return float(quantity(DiodeCells.of([law]), np.array(x), np.array(junction_c))[0])


def fitted(technology, vrrm_v, reverse=((25, 1e-3),), forward=((10, 0.46, 25),)):
    return fit_points(
        technology,
        [ForwardPoint(i, v, c, "max") for i, v, c in forward],
        [ReversePoint(vrrm_v, i, c, "max") for c, i in reverse],
        vrrm_v=vrrm_v,
    )


# Leakage at rated voltage, maxima as printed: (°C, A), growth rate 1/K and doubling interval K between the two points.
LEAKAGE_PAIRS = [
    # STMicroelectronics STPS10L25D, Ed 3B June 1999
    ("schottky", 25, (25, 0.80e-3), (125, 260e-3), 0.05784, 11.98),
    # STMicroelectronics STPS10L40C, per diode
    ("schottky", 40, (25, 0.2e-3), (100, 25e-3), 0.06438, 10.77),
    # STMicroelectronics STPS2L25
    ("schottky", 25, (25, 90e-6), (125, 30e-3), 0.05809, 11.93),
    # STMicroelectronics STTH1L06, ultrafast pn
    ("pn_silicon", 600, (25, 1e-6), (150, 75e-6), 0.03454, 20.07),
    # 1N4004, 25 to 100 °C
    ("pn_silicon", 400, (25, 0.7e-6), (100, 32e-6), None, 13.60),
    # 1N4004, 25 to 125 °C
    ("pn_silicon", 400, (25, 0.7e-6), (125, 320e-6), None, 11.32),
]


@pytest.mark.parametrize(("technology", "vrrm_v", "cold", "hot", "growth", "doubling_k"), LEAKAGE_PAIRS)
def test_leakage_doubles_as_the_sheet_says(technology, vrrm_v, cold, hot, growth, doubling_k):
    law = fitted(technology, vrrm_v, (cold, hot)).maximum
    ratio = at(reverse_a, law, vrrm_v, hot[0]) / at(reverse_a, law, vrrm_v, cold[0])
    ours_growth = np.log(ratio) / (hot[0] - cold[0])
    assert np.log(2) / ours_growth == pytest.approx(doubling_k, rel=0.005)
    if growth is not None:
        assert ours_growth == pytest.approx(growth, rel=0.005)


def test_a_ten_kelvin_rule_would_overstate_an_ultrafast_diode_seventy_seven_fold():
    law = fitted("pn_silicon", 600, ((25, 1e-6), (150, 75e-6))).maximum
    rule_a = at(reverse_a, law, 600, 25.0) * 2 ** ((150 - 25) / 10)
    assert rule_a / at(reverse_a, law, 600, 150.0) == pytest.approx(77, rel=0.01)


# Effective barrier from two leakage points, T² exp law, from the same three Schottky sheets.
@pytest.mark.parametrize(
    ("vrrm_v", "cold", "hot", "barrier_ev"),
    [
        (25, (25, 0.80e-3), (125, 260e-3), 0.5325),
        (40, (25, 0.2e-3), (100, 25e-3), 0.5598),
        (25, (25, 90e-6), (125, 30e-3), 0.5351),
    ],
)
def test_effective_barrier_from_two_leakage_points(vrrm_v, cold, hot, barrier_ev):
    law = fitted("schottky", vrrm_v, (cold, hot)).maximum
    t1_k, t2_k = cold[0] + 273.15, hot[0] + 273.15
    # Our energy has no T² before it: the difference is k·2·ln(T2/T1)/(1/T1 − 1/T2).
    without_t2_ev = law.leakage_ev - K_OVER_Q * 2 * np.log(t2_k / t1_k) / (1 / t1_k - 1 / t2_k)
    assert without_t2_ev == pytest.approx(barrier_ev, abs=0.001)


# STPS10L25D, maxima: 0.46 V at 10 A and 0.55 V at 20 A, 25 °C; 0.35 and 0.48 V at 125 °C. Printed loss:
# 0.22·I + 0.013·I².
STPS10L25D = ((10, 0.46, 25), (20, 0.55, 25), (10, 0.35, 125), (20, 0.48, 125))


def test_threshold_and_slope_of_a_25_v_schottky():
    law = fitted("schottky", 25, ((25, 0.8e-3), (125, 260e-3)), STPS10L25D).maximum
    low_v, high_v = (at(forward_drop_v, law, i, 125.0) for i in (10, 20))
    slope_ohm = (high_v - low_v) / 10
    assert slope_ohm == pytest.approx(0.0130, abs=0.0002)  # two drops, each met to a millivolt
    assert low_v - 10 * slope_ohm == pytest.approx(0.220, abs=0.003)
    assert 10 * low_v == pytest.approx(3.50, rel=0.005)
    assert 20 * high_v == pytest.approx(9.60, rel=0.005)


def test_drop_falls_with_heat_less_at_higher_current():
    law = fitted("schottky", 25, ((25, 0.8e-3), (125, 260e-3)), STPS10L25D).maximum
    slopes_mv = [10 * (at(forward_drop_v, law, i, 125.0) - at(forward_drop_v, law, i, 25.0)) for i in (10, 20)]
    assert slopes_mv == pytest.approx([-1.10, -0.70], abs=0.02)  # mV/K; a millivolt on either drop is 0.01


def test_threshold_and_slope_of_a_2_a_schottky():
    # STPS2L25, maxima at 125 °C: 0.375 V at 2 A, 0.51 V at 4 A; printed loss 0.24·I + 0.068·I².
    law = fitted("schottky", 25, ((25, 90e-6), (125, 30e-3)), ((2, 0.375, 125), (4, 0.51, 125))).maximum
    low_v, high_v = (at(forward_drop_v, law, i, 125.0) for i in (2, 4))
    assert (high_v - low_v) / 2 == pytest.approx(0.068, rel=0.015)  # 0.0675 exact
    assert 2 * low_v == pytest.approx(0.752, rel=0.01)
    assert 4 * high_v == pytest.approx(2.048, rel=0.01)


def test_printed_loss_of_an_ultrafast_diode_is_met_by_its_drop():
    # STTH1L06: P = 0.89·I + 0.165·I², so 1.055 W at 1 A; VF max 1.05 V at 1 A, 150 °C.
    law = fitted("pn_silicon", 600, ((25, 1e-6), (150, 75e-6)), ((1, 1.05, 150),)).maximum
    assert at(forward_drop_v, law, 1.0, 150.0) == pytest.approx(1.055, rel=0.006)


def bare(saturation, ideality, barrier_ev=0.0, power=0.0, **reverse):
    leak = {"leakage_a": 1e-6, "leakage_ref_v": 100.0, "leakage_exponent": 1.0, "leakage_ev": 0.0} | reverse
    return JunctionLaw(saturation, ideality, barrier_ev, power, 0.0, 0.0, **leak)


def test_saturation_current_follows_richardson():
    # Textbook example (semiconductor devices, ch. 8): A* = 114 A/cm²K², 0.67 eV, 300 K, kT/q rounded to 0.0259 V:
    # 5.98e-5 A/cm². The law is anchored at 25 °C with the equation by hand, and asked at 0.0259 V, which is 300.56 K.
    anchor_k, asked_k = 298.15, 0.0259 / K_OVER_Q
    law = bare(114 * anchor_k**2 * np.exp(-0.67 / (K_OVER_Q * anchor_k)), 1.0, 0.67, 2.0)
    ours = float(saturation_a(DiodeCells.of([law]), np.array(asked_k - 273.15))[0])
    assert ours == pytest.approx(5.98e-5 * (asked_k / 300) ** 2, rel=0.002)
    # and the inverse example: 6e-5 A/cm² asks for A* = 114.43
    assert 6e-5 / (300**2 * np.exp(-0.67 / 0.0259)) == pytest.approx(114.43, rel=1e-3)


def test_current_at_0_4_v_grows_578_fold_from_25_to_150_c():
    # Textbook: I0 doubles every 10 K (2^12.5 = 5792.6 over 125 K), eta = 2, k/q = 8.62e-5, T = t + 273: ratio 578.1.
    growth_ev = np.log(2**12.5) / ((1 / 298.15 - 1 / 423.15) / K_OVER_Q)
    law = bare(1e-9, 2.0, barrier_ev=2 * growth_ev)
    ratio = at(current_a, law, 0.4, 150.0) / at(current_a, law, 0.4, 25.0)
    assert ratio == pytest.approx(578.1, rel=0.004)  # k/q and 273.15 in the place of the book's roundings: 0.3 %


def test_shockley_current_at_0_7_v_and_at_minus_0_7_v():
    # Textbook: I0 = 1e-14 A, n = 1, VT = 0.026 V: 4.927 mA forward, −1.0e-14 A in reverse. VT is 0.026 V at 28.57 °C.
    celsius = 0.026 / K_OVER_Q - 273.15
    law = bare(1e-14, 1.0, leakage_a=2e-14, leakage_exponent=6.0)  # leakage of its own only far above a volt
    assert at(current_a, law, 0.7, celsius) == pytest.approx(4.927e-3, rel=1e-3)
    assert at(current_a, law, -0.7, celsius) == pytest.approx(-1.0e-14, rel=1e-3)


@pytest.mark.parametrize(("ideality", "step_mv"), [(1.0, 67.70), (2.0, 135.40)])
def test_fifteenfold_current_costs_67_7_mv_per_unit_of_ideality(ideality, step_mv):
    celsius = 0.025 / K_OVER_Q - 273.15  # VT = 25 mV, as the textbook sets it
    law = bare(1e-12, ideality)
    step_v = at(forward_drop_v, law, 15e-3, celsius) - at(forward_drop_v, law, 1e-3, celsius)
    assert step_v * 1e3 == pytest.approx(step_mv, abs=0.01)


def test_an_ideal_diode_at_20_a_loses_a_watt_where_a_schottky_loses_nine():
    # Analog Devices, technical article on LTC4357/LTC4359: 20 A; 450 mV against 2.8 milliohm, 56 mV and about 1 W.
    switch = ActiveLaw(0.03, 0.0028, 0.0, 1e-6, 40.0, 1.0, 0.5, 155e-6, 0.0)
    drop_v = at(forward_drop_v, switch, 20.0, 25.0)
    assert drop_v == pytest.approx(0.056, rel=0.02)
    assert 20 * drop_v == pytest.approx(1.12, rel=0.02)
    schottky = fitted("schottky", 40, forward=((20, 0.45, 25),)).maximum
    assert 20 * at(forward_drop_v, schottky, 20.0, 25.0) == pytest.approx(9.0, rel=0.02)
