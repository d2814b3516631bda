"""Faults: hand-worked currents for ideal curves, energy in the faulted network, what a diode does and does not do."""

import numpy as np
import pytest
from worked_jobs import CLASSES, cabin, launch, repeater, skiff

from server.physics.circuit import LoopInput, solve
from server.physics.diode import DiodeCells, NoDiode
from server.physics.pv import SingleDiode, StringCells, StringSpec
from server.selection import study
from server.selection.faults import balance_v, into_fault_a
from server.web.schemas import JobIn


def answer(values):
    return study.run(JobIn.model_validate(values).to_job())


def case(found, code, bus="bank disconnected"):
    return next(c for c in found.faults.cases if c.code == code and c.bus == bus)


# A string that gives exactly 8 A up to a sharp knee at 40 V: no shunt, no resistance.
IDEAL = StringSpec(SingleDiode(8.0, 8e-34, 40 / np.log(1e34), 0.0, 1e12), 60, 8.0).cells(
    np.array([1000.0]), np.array([25.0]), np.inf
)
SHORT = StringCells(*(np.array([x]) for x in (0.0, 1e-30, 1.0, 1e9, 0.0)))


@pytest.mark.parametrize("others", [1, 2, 3, 7])
def test_ideal_strings_push_n_minus_1_times_isc_into_a_shorted_one(others):
    bus_v = balance_v(IDEAL, others, SHORT, 0.0)
    assert bus_v == pytest.approx(0.0, abs=1e-6)
    assert into_fault_a(SHORT, DiodeCells.of([NoDiode()]), bus_v, 0.0)[0] == pytest.approx(others * 8.0, rel=1e-6)


def test_energy_closes_in_the_faulted_network():
    # Two healthy strings and a shaded one, no bank: what the two give is what the third and its cable take.
    spec = StringSpec(SingleDiode(9.81, 2.2e-11, 1.7, 0.34, 249.0), 72, 9.8)
    healthy = spec.cells(np.array([1000.0]), np.array([25.0]), 1400.0)
    shaded = spec.cells(np.array([50.0]), np.array([25.0]), 1400.0)
    plain = DiodeCells.of([NoDiode()])
    bus_v = balance_v(healthy, 2, shaded, 0.1)
    gives = solve(LoopInput(healthy, plain, bus_v, 0.1, 25.0, 0.0))
    takes = solve(LoopInput(shaded, plain, bus_v, 0.1, 25.0, 0.0))
    assert takes.current_a[0, 0] < 0
    assert 2 * gives.current_a[0, 0] == pytest.approx(-takes.current_a[0, 0], rel=1e-9)
    given_w = 2 * (gives.string_w - gives.cable_w)[0, 0]
    taken_w = -(takes.string_w - takes.cable_w)[0, 0]
    assert given_w == pytest.approx(taken_w, rel=1e-9)


def test_three_strings_push_three_times_isc_max_into_the_fourth():
    found = answer(repeater(loop_ohm=0.05, max_series_fuse_a=15))
    shorted = case(found, "string_shorted")
    assert shorted.without_a == pytest.approx(3 * 1.25 * 9.8)
    assert shorted.allowed_a == 15
    assert shorted.maximum_a < 1e-2  # a sound diode in each string: leakage
    assert shorted.outcome == "pass"


def test_an_active_rectifiers_own_supply_lies_within_what_a_sound_one_may_read():
    found = answer(launch(controller="series", blocks_at_night="no", candidates=["LM74700-Q1 + IRFP4310Z"]))
    part = found.candidate(found.verdict.choice).part
    designed = found.field_test.night[0]
    assert part.maximum.supply_a == pytest.approx(130e-6)  # LM74700-Q1 data sheet, operating quiescent current, maximum
    assert (
        designed.low_a < part.typical.supply_a < part.maximum.supply_a < designed.high_a < found.field_test.pass_below_a
    )


def test_without_diodes_the_same_fault_exceeds_the_modules_fuse():
    found = answer(cabin(strings=3, max_series_fuse_a=15))
    assert found.verdict.choice == "none"
    shorted = case(found, "string_shorted")
    assert shorted.without_a == pytest.approx(24.5)
    assert shorted.outcome == "fail"


def test_a_bank_feeds_a_short_through_the_cable_alone():
    shorted = case(answer(launch()), "string_shorted", "bank connected")
    assert shorted.without_a == pytest.approx(14.4 / 0.055)  # 262 A
    assert shorted.maximum_a < 2e-3


def test_a_reversed_bank_is_held_by_nothing():
    reversed_bank = case(answer(launch()), "bank_reversed", "bank connected")
    assert reversed_bank.without_a == reversed_bank.maximum_a == pytest.approx(14.4 / 0.055)
    assert reversed_bank.outcome == "fail"
    assert "limits nothing" in reversed_bank.sentence


def test_a_shaded_string_keeps_its_voltage_and_takes_nothing_from_a_low_bank():
    shaded = case(answer(repeater(loop_ohm=0.05)), "string_shaded", "bank connected")
    assert shaded.without_a == 0.0


def test_one_module_shorted_lets_the_bank_in_where_the_rest_holds_less():
    # Two 72-cell modules, one shorted: the other holds some 46 V against 57.6 V of the bank.
    found = answer(repeater(loop_ohm=0.05))
    assert case(found, "module_shorted", "bank connected").without_a > 10
    assert case(found, "module_shorted", "bank connected").maximum_a < 1e-2


def test_one_diode_for_the_array_does_not_stand_between_strings():
    found = answer(launch(module_isc_a=1.0, module_imp_a=0.93, strings=3, placement="array", max_series_fuse_a=2))
    assert found.candidate(found.verdict.choice).part is not None
    shorted = case(found, "string_shorted")
    assert shorted.maximum_a == pytest.approx(2 * 1.25 * 1.0)
    assert shorted.outcome == "fail"


def test_a_shorted_diode_is_only_told_by_night():
    found = answer(launch())
    told = case(found, "diode_shorted", "bank connected")
    assert told.maximum_a == found.candidate("none").dark_typical.night_a[2]
    assert "night reading" in told.sentence


def test_the_fuse_window_is_a_range_and_never_above_the_modules_rating():
    low, high = answer(repeater(max_series_fuse_a=15)).faults.fuse_window_a
    assert low == pytest.approx(1.4 * 9.8)
    assert high == 15
    assert answer(repeater()).faults.fuse_window_a[1] == pytest.approx(2.4 * 9.8)


@pytest.mark.parametrize("job", [launch(), repeater(), cabin(), skiff()], ids=["A", "B", "D", "E"])
def test_every_fault_study_says_that_a_diode_is_not_overcurrent_protection(job):
    faults = answer(job).faults
    assert "not overcurrent protection" in faults.last_word
    assert "battery end" in faults.battery_fuse_sentence


# --- field test -------------------------------------------------------------------------------------------------------


def test_the_nights_windows_tell_a_sound_diode_from_a_shorted_one():
    found = answer(launch())
    test = found.field_test
    windows = {w.code: w for w in test.night}
    assert windows["designed"].high_a < test.pass_below_a < windows["shorted"].low_a
    assert windows["shorted"].high_a == found.candidate("none").dark_typical.night_a[2]
    assert test.shunt_pass_v == pytest.approx((0.1 * test.pass_below_a, 1.0 * test.pass_below_a))
    assert test.clamp_pass_a == pytest.approx(10 * test.pass_below_a)


def test_a_leaky_diode_on_a_tight_string_cannot_be_told_by_night():
    leaky = {**CLASSES["S45"], "reverse": [
        {"reverse_v": 45, "current_a": 0.02, "junction_c": 25, "kind": "typ"},
        {"reverse_v": 45, "current_a": 0.05, "junction_c": 25, "kind": "max"},
    ]}  # fmt: skip
    assert answer(launch(own_diodes=[leaky], box_day_c=25, rth_c_per_w=2)).field_test.pass_below_a is None


def test_a_voltmeter_alone_condemns_a_good_diode():
    # Common practice: 12.7 V across 10 Mohm is only 1.3 uA, which any power Schottky leaks at a fraction of a volt.
    assert answer(launch()).field_test.voltmeter_trap_v > 12.5
    tight = answer(launch(own_diodes=[CLASSES["PN10"]])).field_test.voltmeter_trap_v
    assert tight < 12.5


def test_the_days_drop_is_the_diodes_own():
    reading = answer(launch()).field_test.day[-1]
    # S45: 0.34 V at 1 A and 0.52 V at 15 A, 25 °C; -1 mV/K: at 5.5 A and some 60 °C about 0.39 V.
    assert reading.current_a == pytest.approx(5.5)
    assert reading.low_v < 0.39 < reading.high_v


def test_one_night_reading_typed_back_updates_the_job():
    before = answer(skiff())
    after = answer(skiff(night_reading_a=0.012, night_reading_v=12.8, night_reading_c=22))
    assert after.candidate("none").dark_typical.night_a[0] == pytest.approx(0.012, rel=0.01)
    assert before.candidate("none").dark_typical.night_a[0] < 0.012


# --- second source ----------------------------------------------------------------------------------------------------


def test_a_second_source_raises_drain_and_stress():
    plain, windy = answer(skiff()), answer(skiff(other_source_v=17.0))
    assert plain.second_source is None
    source = windy.second_source
    assert source.bus_v == 17.0
    assert source.without_a > plain.candidate("none").dark_typical.night_a[1]
    assert source.typical_a <= source.maximum_a < source.without_a
    assert windy.facts.reverse_stress_v == 17.0 > plain.facts.reverse_stress_v


@pytest.mark.parametrize(
    ("earthing", "words"), [("negative", "positive conductor"), ("positive", "negative conductor")]
)
def test_the_battery_fuse_stands_in_the_conductor_that_is_not_earthed(earthing, words):
    assert words in answer(launch(earthing=earthing)).faults.battery_fuse_sentence


def test_behind_a_controller_that_blocks_the_bank_feeds_no_fault_of_the_array():
    cases = answer(cabin()).faults.cases
    assert {c.bus for c in cases if c.code in ("string_shorted", "module_shorted", "string_shaded")} == {
        "bank disconnected"
    }
