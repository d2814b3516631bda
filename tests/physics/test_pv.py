"""Label to parameters, the dark shunt, one night reading."""

import math

import numpy as np
import pytest

from server.errors import InputError
from server.physics.pv import ModuleLabel, SingleDiode, StringSpec, dark_shunt_ohm, fit_label

LABELS = [
    ModuleLabel(22.0, 5.9, 18.2, 5.5, 36, voc_pct_per_c=-0.31),
    ModuleLabel(45.6, 9.8, 37.3, 9.2, 72, voc_pct_per_c=-0.29),
    ModuleLabel(39.5, 9.8, 32.7, 9.3, 60),
    ModuleLabel(19.8, 3.05, 15.6, 2.88, 33),
    # KC200GT, label as printed by its maker: Isc 8.21, Voc 32.9, Imp 7.61, Vmp 26.3, -0.123 V/K, 3.18 mA/K.
    ModuleLabel(32.9, 8.21, 26.3, 7.61, 54, "poly", -0.374, 0.0387),
    ModuleLabel(6.0, 0.2, 5.0, 0.18),
]


@pytest.mark.parametrize("label", LABELS, ids=lambda x: f"{x.voc_v:g} V")
def test_the_model_meets_its_label_and_says_by_how_much(label):
    found = fit_label(label)
    assert found.worst[1] < 0.02
    assert found.module.series_ohm >= 0
    lit = StringSpec(found.module, label.series_cells, label.isc_a).cells(
        np.array([1000.0]), np.array([25.0]), math.inf
    )
    # Recomputed here on a fine sweep, not by the fit's own functions.
    y = np.linspace(0, 1.02 * label.voc_v, 200_001)
    i = lit.photo_a - lit.saturation_a * np.expm1(y / lit.slope_v) - y * lit.shunt_s
    v = y - i * lit.series_ohm
    best = np.argmax(v * i)
    assert v[best] == pytest.approx(label.vmp_v, rel=0.021)
    assert i[best] == pytest.approx(label.imp_a, rel=0.021)
    assert v[best] * i[best] == pytest.approx(label.vmp_v * label.imp_a, rel=0.021)
    assert np.interp(0.0, -i, v) == pytest.approx(label.voc_v, rel=0.021)


@pytest.mark.parametrize(
    ("field", "values"),
    [
        ("module_vmp_v", (22.0, 5.9, 23.0, 5.5)),
        ("module_imp_a", (22.0, 5.9, 18.0, 6.0)),
        ("module_vmp_v", (22.0, 5.9, 8.0, 2.0)),
        ("module_voc_v", (-1.0, 5.9, 18.0, 5.5)),
        ("module_isc_a", (22.0, float("nan"), 18.0, 5.5)),
    ],
)
def test_a_label_no_module_can_have_is_refused_by_field(field, values):
    with pytest.raises(InputError) as caught:
        ModuleLabel(*values)
    assert caught.value.field == field


@pytest.mark.parametrize("values", [(22.0, 5.9, 21.4, 5.35), (22.0, 5.9, 11.5, 5.85)])
def test_a_label_whose_values_do_not_belong_together_is_refused_by_field(values):
    # Vmp at 0.97 of Voc with nine tenths of Isc, or at half of Voc with all of it: no exponential bends like that.
    with pytest.raises(InputError) as caught:
        fit_label(ModuleLabel(*values, 36))
    assert caught.value.field.startswith("module_")


def test_cells_are_counted_from_open_circuit_voltage_and_half_cut_ones_as_pairs():
    assert ModuleLabel(22.0, 5.9, 18.2, 5.5).series_cells == 36
    assert ModuleLabel(39.5, 9.8, 32.7, 9.3).series_cells == 60
    assert ModuleLabel(49.5, 13.9, 41.6, 13.1, 144).series_cells == 72


def test_dark_shunt_is_the_bands_resistivity_over_the_cells_area():
    # 36 cells of 5.9 A / 38 mA/cm2 = 155 cm2 at 5 kohm·cm2: 36 × 32.2 ohm.
    assert dark_shunt_ohm(36, 5.9, "middle") == pytest.approx(36 * 5000 / 155.26, rel=1e-3)


def test_the_shunt_runs_from_its_dark_to_its_lit_value():
    spec = StringSpec(SingleDiode(5.91, 3.07e-11, 0.8476, 0.2185, 137.3), 36, 5.9)
    shunt = 1.0 / spec.cells(np.array([0.0, 100.0, 500.0, 1000.0]), np.full(4, 25.0), 1159.0).shunt_s
    assert shunt[0] == pytest.approx(1159.0)
    assert shunt[3] == pytest.approx(137.3)
    assert np.all(np.diff(shunt) < 0)


@pytest.mark.parametrize("strings_of", [1, 2])
def test_one_night_reading_is_met_exactly(strings_of):
    spec = StringSpec(SingleDiode(5.91, 3.07e-11, 0.8476, 0.2185, 137.3), 36, 5.9, strings_of)
    volts = 12.7 * strings_of
    ohm, exists = spec.dark_shunt_from_reading_ohm(0.020, volts, 22.0)
    assert exists
    dark = spec.cells(np.array([0.0]), np.array([22.0]), ohm)
    # The terminals sit I·Rs above the junction when current flows in.
    assert dark.current_a(np.array([volts - 0.020 * dark.series_ohm[0]]))[0] == pytest.approx(-0.020, rel=1e-9)


def test_a_reading_below_what_the_cells_take_is_said_to_be():
    spec = StringSpec(SingleDiode(5.91, 3.07e-11, 0.8476, 0.2185, 137.3), 36, 5.9)
    _, exists = spec.dark_shunt_from_reading_ohm(1e-9, 19.0, 40.0)
    assert not exists


def test_modules_in_series_add_their_voltages():
    module = fit_label(LABELS[0]).module
    one = StringSpec(module, 36, 5.9).cells(np.array([700.0]), np.array([40.0]), 1159.0)
    two = StringSpec(module, 36, 5.9, 2).cells(np.array([700.0]), np.array([40.0]), 1159.0)
    assert two.open_circuit_v() == pytest.approx(2 * one.open_circuit_v(), rel=1e-9)


def test_soiling_takes_light_and_mismatch_takes_current():
    module = fit_label(LABELS[0]).module
    clean = StringSpec(module, 36, 5.9).cells(np.array([900.0]), np.array([25.0]), math.inf)
    soiled = StringSpec(module, 36, 5.9, 1, 0.10, 0.0).cells(np.array([1000.0]), np.array([25.0]), math.inf)
    assert soiled.photo_a == pytest.approx(clean.photo_a, rel=1e-12)
    uneven = StringSpec(module, 36, 5.9, 1, 0.0, 0.10).cells(np.array([1000.0]), np.array([25.0]), math.inf)
    assert uneven.photo_a == pytest.approx(clean.photo_a, rel=1e-12)
