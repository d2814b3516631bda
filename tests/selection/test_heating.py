"""Heat paths, the sinks left open, and what shares what."""

import pytest
from worked_jobs import CLASSES, launch, repeater

from server.catalog.parts import part
from server.physics import thermal
from server.selection import study
from server.web.schemas import JobIn

BOX60 = {
    "module_voc_v": 22.0, "module_isc_a": 10.0, "module_vmp_v": 18.2, "module_imp_a": 9.4, "cells": 36,
    "chemistry": "flooded", "battery_nominal_v": 12, "controller": "shunt", "peak_sun_h": 5, "daylight_h": 11,
    "day_air_c": 30, "night_air_c": 20, "record_low_c": -5, "record_high_c": 40, "loop_ohm": 0.02, "box": "stated",
    "box_day_c": 60,
}  # fmt: skip


def one(values, key, **changes):
    return study.run(JobIn.model_validate({**values, **changes}).to_job()).candidate(key)


def check(item, code):
    return next(c for c in item.checks if c.code == code)


@pytest.mark.parametrize("name", ["MBR4045WT", "12TQ045", "MBR1045", "STPS8L30", "MBR20100CT", "GPA1602"])
@pytest.mark.parametrize("box_c", [50, 60, 70])
def test_the_sink_that_is_asked_for_is_enough_when_it_is_typed_in(name, box_c):
    """Junction, continuous rating and reverse stability hold on the very figure that is printed."""
    key = part(name).key
    left_open = one(BOX60, key, candidates=[name], box_day_c=box_c)
    if left_open.standing == "fail":
        return
    typed = one(BOX60, key, candidates=[name], box_day_c=box_c, sink_c_per_w=left_open.sink_needed_c_per_w)
    assert typed.standing != "fail", typed.reasons
    assert check(typed, "stability").outcome == "pass" or check(left_open, "stability").outcome != "pass"


def test_a_sound_part_is_not_refused_for_a_sink_that_nobody_chose():
    # 12TQ045 in air of 70 °C: a sink sized for the junction alone would leave its case too hot for its rating.
    assert one(BOX60, "12tq045", candidates=["12TQ045"], box_day_c=70).standing == "pass"


def test_the_rules_current_heats_the_case_that_the_rating_refers_to():
    # At 1.5625 × Isc on a fixed sink of 10 °C/W the case is hotter than at 1.25 × Isc, and the rating smaller.
    loose = check(one(BOX60, "mbr4045wt", candidates=["MBR4045WT"], sink_c_per_w=10), "current")
    strict = check(
        one(BOX60, "mbr4045wt", candidates=["MBR4045WT"], sink_c_per_w=10, rule_profile="cold_table"), "current"
    )
    assert strict.met > loose.met
    assert strict.allowed < loose.allowed


def test_a_drop_that_rises_with_heat_is_taken_at_the_limit():
    # RDS(on) 20 mohm growing 0.4 % a degree: at 150 °C it drops half as much again as at 25 °C.
    active = {
        "name": "hot fet", "technology": "active", "vrrm_v": 60, "tj_max_c": 150, "rth_jc_c_per_w": 1, "tab_live": True,
        "active": {"regulated_v": 0.02, "rds_on_ohm": 0.02, "leakage_ref_v": 60},
    }  # fmt: skip
    item = one(BOX60, "hot-fet", own_diodes=[active], controller="direct")
    assert item.worst_power_w == pytest.approx(12.5**2 * 0.02 * (1 + 0.004 * 125), rel=1e-6)
    assert item.hottest_junction_c <= 150 or item.standing == "fail"


def test_both_legs_shed_less_heat_and_count_twice():
    single = one(BOX60, "mbr4045wt", candidates=["MBR4045WT"])
    double = one(BOX60, "mbr4045wt", candidates=["MBR4045WT"], legs="both")
    assert double.worst_power_w < single.worst_power_w
    assert double.typical.night_drain_ah[0] > single.typical.night_drain_ah[0]
    assert check(double, "sharing").outcome == "info"


def test_a_bridge_gives_two_legs_and_a_series_pair_one():
    assert part("KBPC3510").parallel_legs == 2
    assert part("MDD255-16N1").parallel_legs == 1
    assert part("MBR2045CT").parallel_legs == 2


def test_one_sink_under_four_diodes_needs_a_quarter_of_the_resistance():
    # Worked job B: 4.4 °C/W each, about 1.1 °C/W for four on one plate.
    each = one(repeater(), "s200").sink_needed_c_per_w
    plate = one(repeater(one_sink="yes"), "s200").sink_needed_c_per_w
    assert each == pytest.approx(4 * plate, rel=1e-6)
    assert plate == pytest.approx(1.1, rel=0.1)


def test_a_sink_is_worse_at_a_small_rise_by_the_makers_quarter():
    # READ, a heatsink maker's page: at 30 K of rise the figure quoted at 75 K is 25 % worse.
    power = 30.0 / (2.0 * (75 / 30) ** 0.25)
    assert thermal.sink_at_rise_c_per_w(2.0, power) == pytest.approx(2.0 * 1.257, rel=1e-3)
    assert thermal.sink_at_rise_c_per_w(2.0, 100.0) == 2.0  # never better than quoted


def test_the_figure_to_buy_is_the_needed_one_seen_through_a_catalogue():
    for needed, power in ((4.4, 8.7), (10.0, 2.0), (1.0, 40.0)):
        bought = thermal.sink_to_buy_c_per_w(needed, power)
        assert bought <= needed
        assert thermal.sink_at_rise_c_per_w(bought, power) == pytest.approx(needed, rel=1e-9)


def test_a_closed_box_is_warmed_by_the_diodes_in_it():
    # 0.36 m2 of surface: 1/(10 · 0.36) = 0.28 °C/W (engineering estimate).
    assert thermal.box_self_c_per_w(0.36) == pytest.approx(0.28, abs=0.005)
    vented, closed = one(launch(), "s45"), one(launch(box_area_m2=0.1), "s45")
    assert closed.rth_c_per_w == pytest.approx(vented.rth_c_per_w + 1.0)
    assert closed.hottest_junction_c > vented.hottest_junction_c


def test_thin_air_cools_worse():
    # READ, a cooling-trade page: 1 − h/17500: 0.73 at 4800 m.
    assert 1 / thermal.altitude_factor(4800) == pytest.approx(0.73, abs=0.005)
    low, high = (one(launch(heat_path="free_air", altitude_m=h, rth_c_per_w=None), "s45") for h in (0, 4800))
    assert high.rth_c_per_w / low.rth_c_per_w == pytest.approx(1 / 0.726, rel=0.01)


@pytest.mark.parametrize(("reverse_v", "rth"), [(15.0, 28.0), (30.0, 28.0), (15.0, 60.0)])
def test_reverse_loss_derates_the_air_a_part_may_stand_in(reverse_v, rth):
    # READ, ON Semiconductor MBR140SF: T = TJmax − Rth·(Pf + Pr); with Pf = 0 it falls as VR or Rth rises.
    at = thermal.allowable_ambient_c(125.0, rth, 0.0, reverse_v * 0.01)
    assert at == pytest.approx(125.0 - rth * reverse_v * 0.01)
    assert at < thermal.allowable_ambient_c(125.0, rth, 0.0, 0.5 * reverse_v * 0.01)
    assert at < thermal.allowable_ambient_c(125.0, 0.5 * rth, 0.0, reverse_v * 0.01)


def test_above_the_critical_ambient_the_answer_is_no_stable_point():
    hot = {**CLASSES["S45"], "reverse": [
        {"reverse_v": 45, "current_a": 0.02, "junction_c": 25, "kind": "max"},
        {"reverse_v": 45, "current_a": 1.0, "junction_c": 100, "kind": "max"},
    ]}  # fmt: skip
    item = one(launch(box_day_c=100, rth_c_per_w=60, own_diodes=[hot]), "s45")
    assert item.reverse_heat.stable_maximum_c is None
    assert item.reverse_heat.critical_ambient_maximum_c < 100
    assert "no stable point" in check(item, "stability").sentence


def test_one_diode_for_the_array_is_reversed_by_the_bank_alone():
    # All strings lie on its anode's side: like one string of the sum, it meets the bank's voltage only.
    values = {
        "module_voc_v": 45.6, "module_isc_a": 3.0, "module_vmp_v": 37.3, "module_imp_a": 2.8, "cells": 72,
        "chemistry": "agm", "battery_nominal_v": 24, "controller": "series", "blocks_at_night": "no", "peak_sun_h": 5,
        "daylight_h": 11, "day_air_c": 25, "night_air_c": 15, "record_low_c": -10, "loop_ohm": 0.02,
        "candidates": ["MBR1045"],
    }  # fmt: skip
    array = one(values, "mbr1045", strings=2, placement="array")
    alone = one(values, "mbr1045", module_isc_a=6.0, module_imp_a=5.6)
    apart = one(values, "mbr1045", strings=2)
    assert check(array, "reverse_stress").met == pytest.approx(check(alone, "reverse_stress").met)
    assert check(apart, "reverse_stress").met > 45
