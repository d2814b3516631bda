"""The loop: limits by hand, laws, an independent solver, and a batch equal to its cells one at a time."""

import tracemalloc

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from scipy.optimize import elementwise

from server.errors import InputError
from server.physics import diode as dio
from server.physics.circuit import LoopInput, solve
from server.physics.diode import ActiveLaw, DiodeCells, JunctionLaw, NoDiode, PerfectValve
from server.physics.pv import SingleDiode, StringSpec

SCHOTTKY = JunctionLaw(6e-6, 1.1, 0.67, 2.0, 0.0074, 0.0, 8e-5, 45.0, 0.7, 0.6)
LEAKY = JunctionLaw(3e-5, 1.05, 0.60, 2.0, 0.004, 0.0, 5e-3, 45.0, 0.7, 0.55)
SILICON = JunctionLaw(4e-8, 1.7, 1.1, 3.0, 0.011, 0.0, 1e-7, 1000.0, 0.7, 0.5)
ACTIVE = ActiveLaw(0.02, 0.005, 0.004, 2e-6, 65.0, 1.0, 0.6, 8e-5, -0.011)
LAWS = [SCHOTTKY, LEAKY, SILICON, ACTIVE, NoDiode(), PerfectValve()]
NAMES = ["schottky", "leaky", "silicon", "active", "none", "valve"]
NONE, VALVE = 4, 5

# A 36-cell module of 5.9 A; 1159 ohm of dark shunt is 5 kohm·cm2.
MODULE = SingleDiode(5.91, 3.07e-11, 0.8476, 0.2185, 137.3, 0.003)
SPEC = StringSpec(MODULE, 36, 5.9)


def day(rows=97, dark_shunt_ohm=1159.0):
    sun = 1000.0 * np.clip(np.sin(np.linspace(-0.6, np.pi + 0.6, rows)), 0.0, None)
    return SPEC.cells(sun, 20.0 + 30.0 * sun / 1000.0, dark_shunt_ohm)


def solved(string=None, laws=LAWS, bank_v=13.0, ohm=0.055, box_c=40.0, rth=0.0, **more):
    return solve(LoopInput(day() if string is None else string, DiodeCells.of(laws), bank_v, ohm, box_c, rth, **more))


@pytest.mark.parametrize("rth", [0.0, 25.0])
@pytest.mark.parametrize("tracks", [False, True])
@pytest.mark.parametrize("bank_v", [0.0, 3.85, 12.7, 14.4, 19.9, 25.2])
def test_energy_closes_in_every_cell(bank_v, tracks, rth):
    state = solved(bank_v=bank_v, rth=rth, tracks=tracks)
    assert state.converged.all()
    scale = np.maximum(np.abs(state.string_w), 1.0)
    assert np.abs(state.imbalance_w / scale).max() < 1e-9


def test_energy_closes_against_the_photocurrent_too():
    # Light in = junction's recombination + shunt + the string's own resistance + diode + cable + bank.
    state = solved()
    string, y, i = day().column(), state.string_junction_v, state.current_a
    lost_w = y * (string.saturation_a * np.expm1(y / string.slope_v) + y * string.shunt_s) + i**2 * string.series_ohm
    closed = lost_w + state.diode_w + state.cable_w + state.bus_w
    assert closed == pytest.approx(string.photo_a * y, rel=1e-9, abs=1e-9)


def oracle_a(string, law, bank_v, ohm, junction_c):
    """The same loop by scipy's bracketing root finder, cell by cell, in the CURRENT for forward cells."""
    cells = DiodeCells.of([law])

    def offer_less_drops(i, photo, sat, slope, shunt, rs):
        # String voltage at a current has no closed form with a shunt: find it inside, again with scipy.
        def off(y, i, photo, sat, slope, shunt):
            return photo - sat * np.expm1(y / slope) - y * shunt - i

        top = slope * np.log1p(photo / sat)
        found = elementwise.find_root(off, (np.full_like(i, -50.0), top), args=(i, photo, sat, slope, shunt))
        return found.x - i * rs - dio.forward_drop_v(cells, i, np.array(junction_c)) - i * ohm - bank_v

    args = (string.photo_a, string.saturation_a, string.slope_v, string.shunt_s, string.series_ohm)
    best = elementwise.find_root(offer_less_drops, (np.full(len(string), 1e-12), string.photo_a * 0.999999), args=args)
    return best.x


@pytest.mark.parametrize("law", [SCHOTTKY, LEAKY, SILICON], ids=NAMES[:3])
@pytest.mark.parametrize("bank_v", [12.7, 14.4, 16.0])
def test_forward_current_agrees_with_an_independent_solver(law, bank_v):
    string = day()
    lit = np.flatnonzero(string.current_a(np.full(len(string), bank_v + 0.6)) > 0.01)
    string = string.take(lit)
    ours = solved(string, [law], bank_v=bank_v).current_a[:, 0]
    assert ours == pytest.approx(oracle_a(string, law, bank_v, 0.055, 40.0), abs=1e-9)


@pytest.mark.parametrize("law", [SCHOTTKY, LEAKY, SILICON, ACTIVE], ids=NAMES[:4])
def test_backward_current_agrees_with_an_independent_solver(law):
    string = SPEC.cells(np.array([0.0, 0.0, 0.3]), np.array([-10.0, 40.0, 20.0]), 1159.0)
    cells = DiodeCells.of([law])
    ours = solved(string, [law], bank_v=12.7, box_c=np.array([-10.0, 40.0, 20.0])).current_a[:, 0]

    def off(u, t_c, photo, sat, slope, shunt, rs):
        leak = dio.reverse_a(cells, u, t_c)
        y = 12.7 - u - leak * (0.055 + rs)
        return photo - sat * np.expm1(y / slope) - y * shunt + leak

    args = (np.array([-10.0, 40.0, 20.0]), *(getattr(string, n) for n in string.__slots__))
    root = elementwise.find_root(off, (np.zeros(3), np.full(3, 12.7)), args=args)
    assert ours == pytest.approx(-dio.reverse_a(cells, root.x, args[0]), rel=1e-8, abs=1e-13)


def test_a_batch_equals_its_cells_one_at_a_time():
    string, volts = day(41), np.linspace(11.0, 20.0, 41)
    whole = solved(string, bank_v=volts, rth=np.array([0.0, 20.0, 20.0, 30.0, 0.0, 0.0]))
    for row in range(0, 41, 4):
        for column in range(len(LAWS)):
            one = solved(
                string.take(np.array([row])),
                [LAWS[column]],
                bank_v=volts[row : row + 1],
                rth=np.array([0.0, 20.0, 20.0, 30.0, 0.0, 0.0])[column],
            )
            assert one.current_a[0, 0] == pytest.approx(whole.current_a[row, column], rel=1e-9, abs=1e-12)
            assert one.junction_c[0, 0] == pytest.approx(whole.junction_c[row, column], abs=1e-5)


def test_night_drain_with_a_diode_never_exceeds_the_bare_strings():
    for shunt in (232.0, 1159.0, 4637.0):
        state = solved(SPEC.cells(np.zeros(7), np.linspace(-20, 45, 7), shunt), bank_v=12.7)
        drain = -state.current_a
        assert np.all(drain >= 0)
        assert np.all(drain <= drain[:, [NONE]])
        assert np.all(drain[:, VALVE] == 0)


def test_a_diode_that_leaks_more_than_the_dark_string_blocks_nothing():
    # Their series current is held by whichever passes less: here the string, to a few percent.
    huge = JunctionLaw(1e-2, 1.05, 0.5, 2.0, 0.0, 0.0, 5.0, 45.0, 0.7, 0.5)
    state = solved(SPEC.cells(np.zeros(1), np.array([25.0]), 1159.0), [huge, NoDiode()], bank_v=12.7, box_c=25.0)
    assert state.current_a[0, 0] == pytest.approx(state.current_a[0, 1], rel=0.05)


def test_leakage_at_night_rises_with_temperature():
    temps = np.linspace(-20.0, 60.0, 9)
    state = solved(SPEC.cells(np.zeros(9), np.full(9, 20.0), 1159.0), bank_v=12.7, box_c=temps)
    assert np.all(np.diff(-state.current_a[:, :4], axis=0) > 0)


@pytest.mark.parametrize("column", range(4), ids=NAMES[:4])
def test_current_is_continuous_and_monotone_through_zero(column):
    # As the bank rises through the string's open-circuit voltage, the current falls through zero without a step.
    volts = np.linspace(20.6, 21.6, 3001)
    string = SPEC.cells(np.full(3001, 400.0), np.full(3001, 25.0), 1159.0)
    current = solved(string, bank_v=volts).current_a[:, column]
    assert current[0] > 0 > current[-1]
    assert np.all(np.diff(current) < 0)
    assert np.abs(np.diff(current)).max() < 2e-3


def test_no_light_and_no_bank_is_no_current():
    state = solved(SPEC.cells(np.zeros(2), np.full(2, 25.0), 1159.0), bank_v=0.0)
    assert np.abs(state.current_a).max() < 1e-12


def test_a_stiff_string_gives_its_photocurrent_through_any_diode():
    # No shunt, no resistance, a bank far under open circuit: I = IL for every diode.
    ideal = StringSpec(SingleDiode(5.0, 1e-14, 0.9, 0.0, 1e12), 36, 5.0)
    state = solved(ideal.cells(np.array([1000.0]), np.array([25.0]), np.inf), bank_v=12.0, ohm=0.0, box_c=25.0)
    assert state.current_a[0] == pytest.approx(np.full(6, 5.0), abs=1e-6)


def test_self_heating_settles_where_rise_is_resistance_times_loss():
    state = solved(rth=25.0)
    up = state.current_a[:, :4] > 0
    rise = state.junction_c[:, :4] - 40.0
    assert rise[up] == pytest.approx((25.0 * state.diode_w[:, :4])[up], abs=2e-3)


def test_strings_that_share_one_diode_heat_it_together_and_see_their_share():
    # Four strings through one diode: each sees a fourth of the diode; the diode carries four currents.
    four = solve(LoopInput(day(), DiodeCells.of([SCHOTTKY], None, 4), 13.0, 0.0, 40.0, 10.0, strings_per_diode=4.0))
    noon = 48
    i = four.current_a[noon, 0]
    alone = DiodeCells.of([SCHOTTKY])
    drop = dio.forward_drop_v(alone, np.array([4 * i]), np.array([four.junction_c[noon, 0]]))[0]
    assert four.diode_v[noon, 0] == pytest.approx(drop, abs=1e-9)
    assert four.junction_c[noon, 0] - 40.0 == pytest.approx(10.0 * 4 * i * drop, abs=2e-3)


def test_a_converter_takes_the_most_there_is_behind_diode_and_cable():
    best = solved(tracks=True)
    for bus in (12.5, 13.5, 15.0, 16.5, 17.5, 18.5):
        fixed = solved(bank_v=bus)
        lit = best.current_a[:, VALVE] > 0.01
        assert np.all(best.bus_w[lit] >= fixed.bus_w[lit] - 1e-9)


def test_a_converter_that_only_steps_down_gives_way_to_a_bank_above_its_best_input():
    tracked, plain = solved(bank_v=18.5, tracks=True), solved(bank_v=18.5)
    assert np.all(tracked.bus_v >= 18.5 - 1e-12)
    assert tracked.current_a == pytest.approx(plain.current_a, abs=1e-9)


def test_a_junction_past_saving_is_marked_and_is_no_number():
    state = solved(laws=[SILICON, SCHOTTKY], rth=np.array([400.0, 1.0]))
    noon = 48
    assert not state.converged[noon, 0]
    assert np.isnan(state.current_a[noon, 0])
    assert state.converged[:, 1].all()


@pytest.mark.parametrize(("field", "more"), [("battery_v", {"bank_v": -1.0}), ("loop_ohm", {"ohm": np.nan})])
def test_no_loop_is_a_sentence(field, more):
    with pytest.raises(InputError) as caught:
        solved(**more)
    assert caught.value.field == field


positive = {"allow_nan": False, "allow_infinity": False}


@settings(max_examples=150, deadline=None)
@given(
    isc=st.floats(0.003, 500, **positive),
    cells=st.integers(1, 800),
    per_cell=st.floats(0.02, 0.06, **positive),
    sun=st.floats(0, 1600, **positive),
    cell_c=st.floats(-50, 90, **positive),
    bank=st.floats(0, 1.3, **positive),
    ohm=st.floats(0, 20, **positive),
    rth=st.floats(0, 5, **positive),
    tracks=st.booleans(),
)
def test_any_string_any_bank_is_finite_and_closes_or_is_marked(
    isc, cells, per_cell, sun, cell_c, bank, ohm, rth, tracks
):
    slope_v = per_cell * cells
    voc = 0.6 * cells
    sat = isc / np.expm1(voc / slope_v)
    module = SingleDiode(isc, max(sat, 1e-40), slope_v, 0.05 * voc / isc, 50 * voc / isc)
    string = StringSpec(module, cells, isc).cells(np.array([sun, 0.0]), np.array([cell_c, cell_c]), 200 * voc / isc)
    state = solved(string, bank_v=bank * voc, ohm=ohm / isc, box_c=cell_c, rth=rth / isc, tracks=tracks)
    fine = state.converged
    assert np.all(np.isfinite(state.current_a[fine]))
    assert fine[:, NONE:].all()
    off = np.abs(state.imbalance_w[fine])
    assert np.all(off <= 1e-9 * np.maximum(np.abs(state.string_w[fine]), isc * voc * 1e-3) + 1e-9)


def test_a_year_of_hours_for_forty_types_and_both_corners_stays_small():
    hours = np.arange(8760)
    light = 900.0 * np.clip(np.sin(hours / 24 * 2 * np.pi - np.pi / 2), 0.0, None)
    string = SPEC.cells(light, 15.0 + light / 40.0, 1159.0)
    diodes = DiodeCells.of([SCHOTTKY, SILICON] * 40)
    tracemalloc.start()
    try:
        state = solve(LoopInput(string, diodes, 13.0, 0.055, 20.0 + light / 50.0, 5.0))
        _, peak = tracemalloc.get_traced_memory()
    finally:
        tracemalloc.stop()
    assert state.converged.all()
    assert peak < 400e6
