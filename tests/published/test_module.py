"""Cells and modules, lit and dark, against figures in print. MEM: quoted from memory, a secondary test."""

import numpy as np
import pytest

from server.physics.circuit import LoopInput, solve
from server.physics.climate import ross_c
from server.physics.diode import DiodeCells, NoDiode, thermal_voltage_v
from server.physics.pv import ModuleLabel, SingleDiode, StringCells, StringSpec

VT = float(thermal_voltage_v(25.0))


def module(photo, saturation, slope, series, shunt_s):
    return StringCells(*(np.array([float(x)]) for x in (photo, saturation, slope, shunt_s, series)))


def at_v(cells, volts):
    """Terminal current at a terminal voltage: the loop with a plain wire."""
    state = solve(LoopInput(cells, DiodeCells.of([NoDiode()]), volts, 0.0, 25.0, 0.0))
    assert state.converged.all()
    return state.current_a[0, 0]


# READ: pvlib tests/data/precise_iv_curves1.json and its parameter sets (arbitrary-precision arithmetic).
CURVE_1 = module(1.0, 5e-10, 1.01 * 72 * VT, 0.1, 1 / 300)
CURVE_2 = module(1.0, 5e-10, 1.3 * 72 * VT, 0.1, 1 / 300)
CURVE_19 = module(8.0, 5e-10, 1.01 * 72 * VT, 0.1, 1 / 3000)


@pytest.mark.parametrize(
    ("cells", "voc", "isc"),
    [
        (CURVE_1, 39.74810737986973, 0.9996667777132812),
        (CURVE_2, 51.05412126576659, 0.9996667777195376),
        (CURVE_19, 43.8953967976375, 7.999733341954713),
    ],
    ids=["n 1.01", "n 1.3", "8 A"],
)
def test_precise_open_circuit_and_short_circuit(cells, voc, isc):
    assert cells.open_circuit_v()[0] == pytest.approx(voc, abs=1e-8)
    assert at_v(cells, 0.0) == pytest.approx(isc, abs=1e-8)


def test_precise_maximum_power_point_and_curve():
    voc, vmp = 39.74810737986973, 33.93689431545555
    y, i = CURVE_1.max_power(CURVE_1.open_circuit_v())
    assert y[0] - i[0] * 0.1 == pytest.approx(vmp, abs=1e-6)
    assert i[0] == pytest.approx(0.846123860914480, abs=1e-6)
    assert at_v(CURVE_1, voc / 2) == pytest.approx(0.9334201211682994, abs=1e-8)
    assert at_v(CURVE_1, (voc + vmp) / 2) == pytest.approx(0.6869238838646769, abs=1e-8)


def test_a_battery_pushing_current_into_a_lit_module():
    # READ: pvlib tests/test_pvsystem.py, fixture_i_from_v.
    assert at_v(module(7, 6e-7, 0.5, 0.1, 1 / 20), 40.0) == pytest.approx(-299.746389916, abs=1e-6)
    assert at_v(module(7, 6e-7, 0.5, 0.1, 0.0), 40.0) == pytest.approx(-299.7383436645, abs=1e-6)


def test_a_forward_point_without_shunt():
    # READ: the same fixture.
    assert at_v(module(7, 6e-7, 0.5, 0.1, 0.0), 7.5049875193450521) == pytest.approx(3.2244873645510923, abs=1e-9)


# MEM: KC200GT after Villalva, Gazoli and Ruppert 2009: a 1.3, Ns 54 (public copies carry 36: wrong), Rs 0.221,
# Rp 415.405, I0 9.825e-8, and Ipv = Isc (Rp + Rs)/Rp from the label's 8.21 A.
KC200GT = module(8.21 * (415.405 + 0.221) / 415.405, 9.825e-8, 1.3 * 54 * VT, 0.221, 1 / 415.405)
KC200GT_DARK = module(0.0, 9.825e-8, 1.3 * 54 * VT, 0.221, 1 / 415.405)


def test_kc200gt_photocurrent_and_peak():
    assert KC200GT.photo_a[0] == pytest.approx(8.2144, rel=1e-4)
    y, i = KC200GT.max_power(KC200GT.open_circuit_v())
    volts = y[0] - 0.221 * i[0]
    assert volts * i[0] == pytest.approx(200.14, rel=1e-3)
    assert 26.29 < volts < 26.41


@pytest.mark.parametrize(("volts", "milliamps"), [(12.6, -30.42), (25.2, -173.0), (26.4, -279.3)])
def test_kc200gt_dark_current_at_battery_voltage(volts, milliamps):
    assert 1e3 * at_v(KC200GT_DARK, volts) == pytest.approx(milliamps, rel=1e-3)


def test_dark_current_of_the_precise_module_is_nearly_all_shunt():
    # READ-IN: -85.75 mA at 25.6 V, of which the shunt takes 85.30 mA.
    dark = module(0.0, 5e-10, 1.01 * 72 * VT, 0.1, 1 / 300)
    total = at_v(dark, 25.6)
    assert 1e3 * total == pytest.approx(-85.75, rel=1e-3)
    assert 1e3 * (25.6 + total * 0.1) / 300 == pytest.approx(85.30, rel=1e-3)


# Measured: the RTC France cell at 33 °C (Easwarakhanthan's data, READ from a public script); parameters MEM.
@pytest.mark.parametrize(
    ("volts", "measured", "model"),
    [(0.2924, 0.7540, 0.75367), (0.4507, 0.6894, 0.68928), (0.5398, 0.3165, 0.31728)],
)
def test_the_measured_rtc_cell(volts, measured, model):
    cell = module(0.76078, 3.23e-7, 1.4812 * float(thermal_voltage_v(33.0)), 0.03638, 1 / 53.7185)
    assert at_v(cell, volts) == pytest.approx(measured, abs=1.5e-3)
    assert at_v(cell, volts) == pytest.approx(model, abs=1e-4)
    assert cell.open_circuit_v()[0] == pytest.approx(0.5728, abs=1e-3)
    assert at_v(cell, 0.0) == pytest.approx(0.7603, abs=1e-3)


@pytest.mark.parametrize(("bank_v", "share"), [(25.2, 1.74), (12.6, 0.02)])
def test_a_drop_of_0_7_v_below_the_knee_costs_only_the_slope_of_the_curve(bank_v, share):
    # READ-IN: 25.2 -> 25.9 V loses 1.74 % of current, 12.6 -> 13.3 V 0.02 %.
    bare, dropped = at_v(KC200GT, bank_v), at_v(KC200GT, bank_v + 0.7)
    assert 100 * (bare - dropped) / bare == pytest.approx(share, abs=0.05)


def test_currents_at_two_battery_voltages():
    # READ-IN.
    assert at_v(KC200GT, 25.2) == pytest.approx(7.8486, abs=5e-4)
    assert at_v(KC200GT, 25.9) == pytest.approx(7.7118, abs=5e-4)


def test_a_listed_saturation_current_lacks_the_cube_of_temperature():
    # A trap: a library's test lists 7.419e-8 A at 50 °C from 1.94e-9 A at 25 °C, the exponential part alone. With
    # (T/Tref)^3 the ratio is 48.74 (READ: the formula and the listed figures).
    cells = StringSpec(SingleDiode(7.545, 1.94e-9, 1.5, 0.1, 300.0, 0.003), 36, 7.5).cells(
        np.array([800.0, 800.0]), np.array([25.0, 50.0]), np.inf
    )
    assert cells.saturation_a[1] / cells.saturation_a[0] == pytest.approx(48.74, rel=1e-3)
    assert cells.saturation_a[1] == pytest.approx(9.45e-8, rel=2e-3)
    assert cells.saturation_a[1] > 1.2 * 7.419e-8
    # The photocurrent pair of the same test is sound: 6.036 -> 6.096 A at 800 W/m2.
    assert cells.photo_a == pytest.approx([6.036, 6.096], abs=1e-6)


def test_the_textbook_night_leak():
    # MEM, inputs not verified (Masters, stand-alone PV chapter): 40 cells, I0 1e-10 A, 8 ohm a cell, 12.5 V, 38.9 /V.
    cells = module(0.0, 1e-10, 40 / 38.9, 0.0, 1 / (40 * 8))
    assert -at_v(cells, 12.5) == pytest.approx(39.1e-3, rel=0.01)
    assert -at_v(cells, 12.5) * 15 == pytest.approx(0.586, rel=0.01)


def test_module_temperature_takes_voltage():
    # MEM (Masters): NOCT 47, air 30 °C, 1000 W/m2 -> 63.75 °C; Voc 42.8 V at -0.37 %/K -> 36.6 to 36.7 V.
    cell_c = float(ross_c(1000.0, 30.0, 47.0))
    assert cell_c == pytest.approx(63.75)
    assert 36.6 < ModuleLabel(42.8, 5.0, 34.5, 4.6, voc_pct_per_c=-0.37).voc_at_v(cell_c) < 36.7
