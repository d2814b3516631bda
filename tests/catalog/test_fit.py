"""The fit itself: exact where points suffice, class values where they do not, and said so."""

import math

import numpy as np
import pytest
from hypothesis import event, given, settings
from hypothesis import strategies as st

from server.catalog import classes
from server.catalog.datasheet import ForwardPoint, ReversePoint
from server.catalog.fit import fit_points
from server.errors import InputError
from server.physics.diode import DiodeCells, forward_drop_v, reverse_a

# Model classes, engineering estimates that a fit must meet as stated. Key, technology, two drops (A, V) at 25 °C, slope
# in mV/K, VRRM, leakage at VRRM in mA: typical and maximum at 25 °C, typical and maximum hot; hot °C, ideality.
CLASSES = [
    ("S45", "schottky", (1, 0.34), (15, 0.52), -1.0, 45, 0.08, 0.5, 8, 50, 100, 1.1),
    ("S40-3", "schottky", (1, 0.37), (3, 0.475), -1.0, 40, 0.1, 2, 5, 20, 100, 1.1),
    ("S40-1", "schottky", (0.1, 0.31), (1, 0.47), -1.1, 40, 0.02, 1, 1.5, 10, 100, 1.1),
    ("S45-20", "schottky", (1, 0.29), (20, 0.50), -1.0, 45, 0.2, 1, 20, 100, 100, 1.1),
    ("SLL", "schottky", (0.1, 0.38), (0.5, 0.50), -1.2, 30, 0.0005, 0.005, 0.05, 0.3, 100, 1.1),
    ("S60", "schottky", (1, 0.42), (10, 0.62), -1.2, 60, 0.03, 0.3, 4, 25, 100, 1.1),
    ("S100", "schottky", (2, 0.56), (20, 0.82), -1.4, 100, 0.006, 0.2, 2, 12, 125, 1.1),
    ("S200", "schottky", (2, 0.66), (20, 0.90), -1.5, 200, 0.004, 0.1, 2, 20, 125, 1.1),
    ("PN10", "pn_silicon", (1, 0.74), (10, 0.95), -1.7, 1000, 0.0001, 0.01, 0.02, 0.1, 100, 1.7),
    ("PN1", "pn_silicon", (0.1, 0.72), (1, 0.90), -1.8, 1000, 5e-5, 0.005, 0.005, 0.05, 100, 1.7),
    ("PN35", "pn_silicon", (1, 0.72), (17.5, 1.00), -1.7, 1000, 0.0002, 0.01, 0.05, 0.2, 100, 1.7),
]


def volts(law, current_a, junction_c):
    return float(forward_drop_v(DiodeCells.of([law]), np.array(current_a), np.array(junction_c))[0])


def amps(law, reverse_v, junction_c):
    return float(reverse_a(DiodeCells.of([law]), np.array(reverse_v), np.array(junction_c))[0])


@pytest.mark.parametrize("case", CLASSES, ids=lambda case: case[0])
def test_model_classes_are_met_within_a_millivolt_and_a_percent(case):
    _, technology, *drops, slope_mv, vrrm_v, typ_ma, max_ma, hot_typ_ma, hot_max_ma, hot_c, ideality = case
    fit = fit_points(
        technology,
        [ForwardPoint(i, v, 25, "typ") for i, v in drops],
        [
            ReversePoint(vrrm_v, typ_ma / 1e3, 25, "typ"),
            ReversePoint(vrrm_v, max_ma / 1e3, 25, "max"),
            ReversePoint(vrrm_v, hot_typ_ma / 1e3, hot_c, "typ"),
            ReversePoint(vrrm_v, hot_max_ma / 1e3, hot_c, "max"),
        ],
        vrrm_v=vrrm_v,
        ideality=ideality,
        forward_slope_v_per_k=slope_mv / 1e3,
    )
    for i, v in drops:
        for law in (fit.typical, fit.maximum):  # no maximum drop is given: the typical stands for it
            assert volts(law, i, 25) == pytest.approx(v, abs=1e-3)
            assert volts(law, i, 100) == pytest.approx(v + slope_mv / 1e3 * 75, abs=1e-3)
    for law, cold_ma, hot_ma in ((fit.typical, typ_ma, hot_typ_ma), (fit.maximum, max_ma, hot_max_ma)):
        assert amps(law, vrrm_v, 25) * 1e3 == pytest.approx(cold_ma, rel=0.01)
        assert amps(law, vrrm_v, hot_c) * 1e3 == pytest.approx(hot_ma, rel=0.01)
    assert fit.typical.ideality == pytest.approx(ideality, abs=1e-6)
    assert any("no maximum drop" in words for words in fit.assumed)


FORWARD = [ForwardPoint(3, 0.5, 25, "max")]
COLD, HOT = ReversePoint(40, 2e-3, 25, "max"), ReversePoint(40, 20e-3, 100, "max")


def test_only_maxima_printed_hangs_the_typical_part_on_the_hot_one():
    fit = fit_points("schottky", FORWARD, [COLD, HOT], vrrm_v=40)
    assert amps(fit.maximum, 40, 25) == pytest.approx(2e-3, rel=1e-3)
    assert amps(fit.maximum, 40, 100) == pytest.approx(20e-3, rel=1e-3)
    hot_a = 20e-3 * classes.HOT_RATIO["schottky"]
    # By hand: 1/298.15 − 1/373.15 = 6.7413e-4 1/K; 0.6 eV over k = 6962.7 K; together a growth of exp(4.694) = 109.3.
    assert amps(fit.typical, 40, 100) == pytest.approx(hot_a, rel=1e-3)
    assert amps(fit.typical, 40, 25) == pytest.approx(hot_a / 109.3, rel=2e-3)
    assert volts(fit.maximum, 3, 25) == pytest.approx(0.5, abs=1e-3)
    assert volts(fit.typical, 3, 25) == pytest.approx(0.5 - classes.DROP_OFFSET_V["schottky"], abs=2e-3)
    words = " ".join(fit.assumed)
    for said in (
        "0.333 of the hot maximum",
        "0.6 eV",
        "VR^0.7",
        "-1.0 mV/K",
        "70 mV below the maximum at 3 A",
        "series drop",
    ):
        assert said in words


def test_one_drop_at_one_temperature_cools_by_the_class_slope():
    fit = fit_points("schottky", FORWARD, [COLD, HOT], vrrm_v=40)
    assert (volts(fit.maximum, 3, 100) - volts(fit.maximum, 3, 25)) / 75 == pytest.approx(-1.0e-3, abs=0.05e-3)


def test_only_typical_printed_divides_by_the_ratios_for_the_maximum():
    typ = [ReversePoint(40, 5e-5, 25, "typ"), ReversePoint(40, 5e-3, 100, "typ")]
    fit = fit_points("schottky", [ForwardPoint(3, 0.45, 25, "typ")], typ, vrrm_v=40)
    assert amps(fit.maximum, 40, 25) == pytest.approx(5e-5 / classes.COLD_RATIO["all"], rel=0.01)
    assert amps(fit.maximum, 40, 100) == pytest.approx(5e-3 / classes.HOT_RATIO["schottky"], rel=0.01)
    assert amps(fit.typical, 40, 25) == pytest.approx(5e-5, rel=0.01)
    assert volts(fit.maximum, 3, 25) == volts(fit.typical, 3, 25)
    assert any("no maximum leakage" in words for words in fit.assumed)


def test_a_typical_part_alone_cold_is_heated_by_the_class_energy():
    fit = fit_points("pn_silicon", [ForwardPoint(1, 0.9, 25, "typ")], [ReversePoint(400, 1e-7, 25, "typ")], vrrm_v=400)
    assert amps(fit.typical, 400, 25) == pytest.approx(1e-7, rel=1e-3)
    # 0.55 eV over 25 to 100 °C: exp(0.55/8.617e-5 · 6.7413e-4) = exp(4.303) = 73.9
    assert amps(fit.typical, 400, 100) == pytest.approx(73.9e-7, rel=0.01)


def test_two_voltages_at_one_temperature_give_the_growth_with_voltage():
    # Made by hand: 10 µA at 40 V, exponent 1.2, so 10·0.25^1.2 = 1.895 µA at 10 V. The drop is that of a diode with
    # next to no saturation current, which would add a part that does not grow with voltage.
    points = [ReversePoint(v, i, 25, "max") for v, i in ((10, 1.895e-6), (40, 10e-6))]
    fit = fit_points("schottky", [ForwardPoint(1, 0.9, 25, "max")], points, vrrm_v=40)
    assert fit.maximum.leakage_exponent == pytest.approx(1.2, abs=0.02)
    assert fit.leakage_misfit_log < 0.02
    held = fit_points("schottky", [ForwardPoint(1, 0.9, 25, "max")], points, vrrm_v=40, leakage_exponent=1.0)
    assert held.maximum.leakage_exponent == pytest.approx(1.0, abs=1e-6)


def test_resistance_is_found_where_two_currents_leave_it():
    # By hand: 0.40 V at 1 A with 20 milliohm and n = 1.08: 0.40 + 0.02·9 + 1.08·0.025693·ln 10 = 0.6439 V at 10 A.
    fit = fit_points(
        "schottky", [ForwardPoint(1, 0.40, 25, "max"), ForwardPoint(10, 0.6439, 25, "max")], [COLD, HOT], vrrm_v=40
    )
    assert fit.maximum.series_ohm == pytest.approx(0.020, abs=0.0005)


def test_a_drop_that_rises_with_heat_asks_for_resistance_that_does():
    # C5D50065D, typical: 1.25 and 1.5 V at 25 °C, 1.3 and 1.8 V at 175 °C, 25 and 50 A.
    points = [
        ForwardPoint(i, v, c, "typ") for i, v, c in ((25, 1.25, 25), (50, 1.5, 25), (25, 1.3, 175), (50, 1.8, 175))
    ]
    fit = fit_points("sic_schottky", points, [ReversePoint(650, 5e-5, 25, "typ")], vrrm_v=650)
    assert fit.forward_misfit_v < 0.01
    # Between the two currents: 0.25 V at 25 °C, 0.50 V at 175 °C: about twice the resistance.
    assert 0.004 < fit.typical.series_ohm_per_k / fit.typical.series_ohm < 0.009


def test_an_impossible_rating_or_override_is_refused_by_name():
    for field, arguments in (
        ("vrrm_v", {"vrrm_v": 0.0}),
        ("ideality", {"vrrm_v": 40, "ideality": 9.0}),
        ("forward_slope_v_per_k", {"vrrm_v": 40, "forward_slope_v_per_k": -1.0}),
        ("leakage_exponent", {"vrrm_v": 40, "leakage_exponent": float("nan")}),
    ):
        with pytest.raises(InputError) as refused:
            fit_points("schottky", FORWARD, [COLD], **arguments)
        assert refused.value.field == field
    for field, forward, reverse in (("forward", [], [COLD]), ("reverse", FORWARD, [])):
        with pytest.raises(InputError) as refused:
            fit_points("schottky", forward, reverse, vrrm_v=40)
        assert refused.value.field == field
    with pytest.raises(InputError, match="valve"):
        fit_points("valve", FORWARD, [COLD], vrrm_v=40)


def test_columns_that_cross_are_refused_beyond_a_tenth_of_a_volt():
    most = [ForwardPoint(1, 0.50, 25, "max"), ForwardPoint(10, 0.60, 25, "max")]
    with pytest.raises(InputError, match="typical drops lie up to"):
        fit_points("schottky", [*most, ForwardPoint(10, 0.90, 26, "typ")], [COLD], vrrm_v=40)
    fit = fit_points("schottky", [*most, ForwardPoint(10, 0.62, 26, "typ")], [COLD], vrrm_v=40)
    assert volts(fit.typical, 10, 25) <= volts(fit.maximum, 10, 25) + 1e-9
    assert "typical_drop_limited" in {remark.code for remark in fit.warnings}


def test_the_same_points_give_the_same_fit():
    one, two = (fit_points("schottky", FORWARD, [COLD, HOT], vrrm_v=40) for _ in range(2))
    assert one == two


KIND, CELSIUS = st.sampled_from(["typ", "max"]), st.floats(-40, 175)
FORWARD_POINT = st.builds(ForwardPoint, st.floats(1e-3, 100), st.floats(0.05, 3), CELSIUS, KIND)
REVERSE_POINT = st.builds(
    ReversePoint, st.floats(1, 100), st.floats(-11, -1).map(lambda power: 10.0**power), CELSIUS, KIND
)


@settings(max_examples=80, deadline=None)
@given(
    st.sampled_from(sorted(classes.CLASSES)),
    st.lists(FORWARD_POINT, min_size=1, max_size=5),
    st.lists(REVERSE_POINT, min_size=1, max_size=5),
)
def test_any_points_are_refused_or_give_corners_in_order(technology, forward, reverse):
    try:
        fit = fit_points(technology, forward, reverse, vrrm_v=100)
    except InputError as refused:
        event(f"refused: {refused.field}")  # the gate's sentences have their own tests
        return
    corners = DiodeCells.of([fit.typical, fit.maximum])
    for celsius in (0.0, 25.0, 60.0, 100.0):
        typ_a, max_a = reverse_a(corners, np.array([[5.0], [13.0], [50.0], [100.0]]), np.array(celsius)).T
        assert np.all(typ_a <= np.maximum(max_a, 1e-9) * (1 + 1e-6))
        typ_v, max_v = forward_drop_v(corners, np.array([[max(p.current_a for p in forward)]]), np.array(celsius)).T
        assert np.all(typ_v <= max_v + 1.1e-3)
    assert math.isfinite(fit.forward_misfit_v)
    assert math.isfinite(fit.leakage_misfit_log)
