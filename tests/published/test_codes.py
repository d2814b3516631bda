"""Voltage, current and protection rules against figures in print."""

import pytest
from worked_jobs import CLASSES, launch

from server.errors import InputError
from server.physics.pv import ModuleLabel
from server.selection import ratings, study
from server.selection.job import Rule
from server.web.schemas import JobIn


def test_cold_voltage_by_coefficient():
    # READ: electricians' course page: 49.5 V, -0.27 %/K, -10 °C -> 54.18 V; 11 in series stay under 600 V at 596 V.
    cold = ModuleLabel(49.5, 11.2, 41.0, 10.5, voc_pct_per_c=-0.27).voc_at_v(-10.0)
    assert cold == pytest.approx(54.18, rel=2e-4)
    assert 11 * cold == pytest.approx(596, abs=0.5)
    assert 12 * cold > 600


# READ: NEC 2017 Table 690.7(A). At -5 °C a Spanish training page has 1.10: the table says 1.12.
TABLE = [(22, 1.02), (15, 1.04), (0, 1.10), (-3, 1.12), (-5, 1.12), (-9, 1.14), (-18, 1.18), (-28, 1.21), (-38, 1.25)]


@pytest.mark.parametrize(("coldest_c", "factor"), [*TABLE, (25, 1.0), (31, 1.0), (-40, 1.25)])
def test_cold_voltage_table(coldest_c, factor):
    assert ratings.table_factor(coldest_c) == factor


def test_a_wrong_public_value_is_not_ours():
    ours = ratings.table_factor(-5)
    assert ours != pytest.approx(1.10)


def test_below_forty_degrees_of_frost_the_table_ends():
    with pytest.raises(InputError, match="-40"):
        ratings.table_factor(-41)


def test_a_fraction_of_a_degree_counts_as_the_colder_row():
    assert ratings.table_factor(-5.5) == 1.14


def test_current_factors():
    # READ: Isc 11.2 A -> 14.0 A (× 1.25) -> 17.5 A (× 1.5625); NEC 690.8(A), note: together 156 %.
    isc_max_a = 11.2 * ratings.ISC_MAX_FACTOR
    assert isc_max_a == pytest.approx(14.0)
    assert 11.2 * ratings.current_factor(Rule("cold_table")) == pytest.approx(17.5)


@pytest.mark.parametrize(("strings", "needed"), [(1, False), (2, False), (4, False), (5, True)])
def test_the_three_string_rule(strings, needed):
    # READ (rule): NEN 1010:2020, 712.431.4; Isc 5 A, module maximum 15 A: limit 20.25 A; 4 strings push 18.75 A, 5
    # push 25 A.
    assert ratings.string_protection_needed(strings, 5.0, 15.0) is needed
    if strings > 1:
        assert ratings.fault_current_a(strings, 5.0) == pytest.approx((strings - 1) * 6.25)


@pytest.mark.parametrize(("capacity_ah", "limit_a"), [(100, 3.0), (220, 6.6)])
def test_the_self_regulated_charging_limit(capacity_ah, limit_a):
    # READ: NEC 2017 690.72: less than 3 % of Ah in an hour.
    assert ratings.self_regulated_limit_a(capacity_ah) == pytest.approx(limit_a)


def test_four_modules_in_parallel():
    # MEM (Wiles, Suggested Practices): 4 × 3.8 A = 15.2; × 1.25 = 19.0; × 1.25 = 23.75 A.
    assert 4 * 3.8 * ratings.current_factor(Rule("cold_table")) == pytest.approx(23.75)


def test_diode_ratings_by_the_array_standard():
    # MEM (IEC 62548): VRRM >= 2 × Voc,max, IF >= 1.4 × Isc: for the module above 108.4 V and 15.68 A.
    rule = Rule("double_voc")
    assert ratings.voc_factor(rule) * 54.18 == pytest.approx(108.4, abs=0.05)
    assert ratings.current_factor(rule) * 11.2 == pytest.approx(15.68)


def test_a_kit_that_the_rule_refuses():
    # READ (Marlec SM335): a 5 A diode for modules up to 60 W; 1.4 × 3.8 A = 5.32 A is asked.
    kit = {**CLASSES["S60"], "name": "kit", "if_av_a": 5.0}
    job = launch(module_isc_a=3.8, module_imp_a=3.5, rule_profile="double_voc", own_diodes=[kit])
    found = study.run(JobIn.model_validate(job).to_job()).candidate("kit")
    check = next(item for item in found.checks if item.code == "current")
    assert check.met == pytest.approx(5.32)
    assert check.outcome == "fail"
    assert found.standing == "fail"
