"""The study as a whole: what must hold for any job, with the packaged catalogue and climates."""

from dataclasses import replace

import pytest
from worked_jobs import cabin, launch, skiff

from server.errors import InputError
from server.selection import study
from server.selection.heating import derated_current_a
from server.selection.ranking import Entry, order, plain_equal
from server.web.schemas import JobIn

YEAR = {
    "module_voc_v": 22.0, "module_isc_a": 5.9, "module_vmp_v": 18.2, "module_imp_a": 5.5, "preset": "helsinki",
    "chemistry": "agm", "battery_nominal_v": 12, "battery_ah": 100, "controller": "series", "cable_one_way_m": 6,
    "cable_mm2": 4,
}  # fmt: skip


def answer(values, **changes):
    return study.run(JobIn.model_validate({**values, **changes}).to_job())


@pytest.fixture(scope="module")
def year():
    return answer(YEAR)


def test_the_leanest_month_decides_in_the_north(year):
    assert year.facts.periods[year.facts.deciding_period] == "December"
    sun = year.facts.sun_kwh_m2
    assert sun[11] == min(sun)


def test_a_year_is_its_months(year):
    for item in year.candidates:
        ledger = item.typical
        if ledger.year_net_wh != ledger.year_net_wh:
            continue
        by_month = sum(x * n for x, n in zip(ledger.net_wh, year.facts.period_days, strict=True))
        assert by_month == pytest.approx(ledger.year_net_wh, rel=1e-9)
    assert sum(year.facts.period_days) == pytest.approx(365.0)


def test_no_candidate_beats_the_perfect_valve(year):
    valve = year.candidate("perfect-valve")
    for item in year.candidates:
        for ledger in (item.typical, item.maximum):
            for ours, best in zip(ledger.net_wh, valve.typical.net_wh, strict=True):
                assert not ours > best + 1e-9


def test_maximum_parts_drain_no_less_than_typical_ones(year):
    for item in year.candidates:
        for typical, maximum in zip(item.typical.night_drain_ah, item.maximum.night_drain_ah, strict=True):
            assert not maximum < typical - 1e-12


def test_a_diode_drains_no_more_than_the_bare_string(year):
    none = year.candidate("none").typical.night_drain_ah
    for item in year.candidates:
        if item.technology in ("active", "none", "reference"):
            continue
        assert all(not ours > bare + 1e-12 for ours, bare in zip(item.maximum.night_drain_ah, none, strict=True))


def test_every_catalogue_part_is_judged_and_every_cell_closes(year):
    assert len(year.candidates) == 94 + 2
    assert year.audit.worst_imbalance_frac < 1e-9
    assert year.verdict.choice is not None
    assert [c.rank for c in year.candidates if c.rank] == list(
        range(1, 1 + sum(c.rank is not None for c in year.candidates))
    )


def test_parts_that_would_burn_have_no_ledger_and_it_is_said(year):
    notes = {note.code for note in year.warnings}
    assert "no_ledger" in notes
    assert year.candidate("1n4001").standing == "fail"


def test_unknown_blocking_is_computed_as_not_blocking_and_said(year):
    assert "blocking_unknown" in {note.code for note in year.warnings}
    assert year.candidate("none").typical.night_drain_ah[0] > 0
    blocked = answer(YEAR, blocks_at_night="yes", candidates=["1N5822"])
    assert blocked.candidate("none").typical.night_drain_ah == (0.0,) * 12
    assert blocked.verdict.kind == "controller_blocks"


def test_a_months_dark_days_take_harvest_and_lengthen_the_drain():
    plain = answer(YEAR, candidates=["MBR1045"])
    snowed = answer(YEAR, candidates=["MBR1045"], dark_days_per_month=10)
    for month in range(12):
        assert (
            snowed.candidate("none").typical.delivered_ah[month] < plain.candidate("none").typical.delivered_ah[month]
        )
        assert (
            snowed.candidate("none").typical.night_drain_ah[month]
            > plain.candidate("none").typical.night_drain_ah[month]
        )


def test_the_controllers_own_drain_burdens_all_alike():
    without, with_own = (
        answer(YEAR, candidates=["MBR1045"]),
        answer(YEAR, candidates=["MBR1045"], controller_night_a=0.01),
    )
    for key in ("mbr1045", "none"):
        own = without.candidate(key).typical.net_ah[5] - with_own.candidate(key).typical.net_ah[5]
        assert own == pytest.approx(0.01 * without.facts.dark_hours[5], rel=1e-9)


def test_more_cable_costs_more():
    nets = [
        answer(YEAR, candidates=["MBR1045"], cable_one_way_m=m).candidate("mbr1045").typical.year_net_wh
        for m in (1, 20, 80)
    ]
    assert nets[0] > nets[1] > nets[2]


def test_direct_charging_far_below_the_knee_loses_the_slope_only():
    # 0.5 V of drop on a 12 V bank and a 36-cell module in cool air: heat is 30 times what the bank misses.
    item = answer(launch()).candidate("s60").typical
    assert item.day_loss_wh[0] < item.heat_wh[0] / 10


def test_one_diode_for_the_array_carries_all_strings():
    per_string = answer(cabin(blocks_at_night="no", own_diodes=cabin()["own_diodes"][1:2], rule_profile="stress_only"))
    array = answer(
        cabin(
            blocks_at_night="no", own_diodes=cabin()["own_diodes"][1:2], rule_profile="stress_only", placement="array"
        )
    )
    one, all_ = per_string.candidate("s100"), array.candidate("s100")
    assert all_.typical.heat_wh[0] > one.typical.heat_wh[0]  # one part at twice the current drops more
    current = {c.code: c for c in all_.checks}["current"]
    assert current.met == pytest.approx(2 * {c.code: c for c in one.checks}["current"].met)


@pytest.mark.parametrize("place", ["singapore", "northway", "el_alto", "sydney"])
def test_every_climate_is_answered(place):
    found = answer(YEAR, preset=place, candidates=["MBR1045", "10A10"])
    assert found.verdict.sentence
    assert found.audit.not_converged == 0


@pytest.mark.parametrize(("lat", "lon"), [(90, 0), (-90, 0), (70, 25), (0, -180), (0, 180), (31.5, 35.5), (-75, 0)])
def test_any_place_on_earth_is_answered(lat, lon):
    found = answer({k: v for k, v in YEAR.items() if k != "preset"}, lat_deg=lat, lon_deg=lon, candidates=["MBR1045"])
    assert found.audit.not_converged == 0
    assert found.facts.climate_rough
    assert "climate_rough" in {note.code for note in found.warnings}


def test_nothing_safe_is_an_answer():
    only = [d for d in launch()["own_diodes"] if d["name"] == "S45"]
    found = answer(launch(box_day_c=65, rth_c_per_w=28, own_diodes=only))
    assert found.verdict.kind == "nothing_safe"
    assert found.verdict.choice is None


def test_fit_none_is_an_answer():
    # A silicon diode alone against a bare string that hardly leaks.
    only = [d for d in skiff()["own_diodes"] if d["name"] == "PN10"]
    found = answer(skiff(13.8, 35.0, own_diodes=only))
    assert found.verdict.kind == "fit_none"


# --- order ------------------------------------------------------------------------------------------------------------


def test_standing_comes_before_energy_and_heat_decides_among_equals():
    entries = [
        Entry("hot", "pass", 100.0, 9.0),
        Entry("cool", "pass", 99.9, 3.0),
        Entry("poor", "pass", 90.0, 1.0),
        Entry("edge", "marginal", 100.8, 0.0),
        Entry("far edge", "marginal", 140.0, 0.0),
        Entry("asks", "confirm", 130.0, 0.0),
        Entry("bad", "fail", 200.0, 0.0),
        Entry("ideal", "reference", 300.0, 0.0),
    ]
    keys, tied = order(entries, 0.2)
    # A marginal part must be five resolutions better than a sound one: 140 is, 100.8 is not.
    assert keys == ["far edge", "cool", "hot", "edge", "poor", "asks"]
    assert tied == set()


def test_among_equals_the_one_that_stays_so_at_maximum_leads():
    entries = [Entry("big die", "pass", 68.03, 1.3, 67.80), Entry("smaller die", "pass", 68.04, 1.5, 68.00)]
    assert order(entries, 0.14)[0] == ["smaller die", "big die"]


def test_equals_of_the_leader_are_told_and_a_missing_number_comes_last():
    entries = [Entry("a", "pass", float("nan"), 1.0), Entry("none", "pass", 5.0, 0.0), Entry("b", "pass", 5.05, 2.0)]
    assert order(entries, 0.1) == (["none", "b", "a"], {"none", "b"})


# --- every rating has one that fails and one that passes --------------------------------------------------------------


def outcome(code, key="s45", **changes):
    item = answer(launch(**changes)).candidate(key)
    return next(c.outcome for c in item.checks if c.code == code)


@pytest.mark.parametrize(
    ("code", "fails", "passes"),
    [
        (
            "reverse_stress",
            {"battery_highest_v": 23.9, "battery_nominal_v": 12, "strings": 2, "modules_in_series": 2},
            {},
        ),
        ("rule_voltage", {"rule_profile": "double_voc"}, {"rule_profile": "cold_table"}),
        ("junction", {"box_day_c": 65, "rth_c_per_w": 28}, {}),
        ("stability", {"box_day_c": 100, "rth_c_per_w": 60}, {}),
    ],
)
def test_each_limit_can_fail_and_can_pass(code, fails, passes):
    assert outcome(code, **fails) == "fail"
    assert outcome(code, **passes) == "pass"


@pytest.mark.parametrize(("if_av_a", "expected"), [(5.0, "fail"), (15.0, "pass")])
def test_continuous_current_can_fail_and_pass(if_av_a, expected):
    part = {**launch()["own_diodes"][0], "if_av_a": if_av_a}
    assert outcome("current", own_diodes=[part]) == expected


@pytest.mark.parametrize(("ifsm_a", "expected"), [(8.0, "fail"), (250.0, "pass")])
def test_surge_can_fail_and_pass(ifsm_a, expected):
    part = {**launch()["own_diodes"][0], "ifsm_a": ifsm_a}
    assert outcome("surge", own_diodes=[part]) == expected


def test_derating_is_a_straight_line_to_the_junction_limit():
    assert derated_current_a(15.0, 100.0, 150.0, 90.0) == 15.0
    assert derated_current_a(15.0, 100.0, 150.0, 125.0) == pytest.approx(7.5)
    assert derated_current_a(15.0, 100.0, 150.0, 160.0) == 0.0


def test_headroom_is_told_where_the_string_is_short():
    short = answer(skiff(13.8, 35.0)).candidate("s45")
    roomy = answer(launch()).candidate("s45")
    assert next(c for c in short.checks if c.code == "headroom").margin_frac < 0
    assert next(c for c in roomy.checks if c.code == "headroom").margin_frac > 0


# --- every caution has a job that calls for it and one that does not --------------------------------------------------

JETTY, CABIN, SKIFF = launch(), cabin(), skiff()
CAUTIONS = [
    ("not_a_fuse", JETTY, CABIN),
    ("hydrogen", JETTY, CABIN),
    ("no_regulator", SKIFF, JETTY),
    ("shunt_regulator", JETTY, SKIFF),
    ("active_confirm", SKIFF, JETTY),
    ("fed_fault", JETTY, CABIN),
    ("string_fuse", cabin(strings=4), CABIN),
    ("live_tab", cabin(blocks_at_night="no", rule_profile="stress_only", placement="array", controller="series",
                       battery_nominal_v=48, battery_night_v=53,
                       own_diodes=[{**CABIN["own_diodes"][1], "vrrm_v": 200}]), JETTY),
    ("polarity", JETTY, CABIN),
    ("hot_case", JETTY, CABIN),
    ("junction_box", launch(box="junction_box", rth_c_per_w=5), JETTY),
    ("parallel", launch(strings=2, placement="array"), launch(strings=2)),
    ("controller_check", CABIN, JETTY),
    ("lithium_cold", CABIN, JETTY),
    ("headroom", skiff(13.8, 35.0), JETTY),
    ("over_irradiance", JETTY, CABIN),
    ("surge", JETTY, CABIN),
]  # fmt: skip


@pytest.mark.parametrize(("code", "called", "not_called"), CAUTIONS, ids=[row[0] for row in CAUTIONS])
def test_each_caution_is_called_by_the_job(code, called, not_called):
    assert code in {c.code for c in answer(called).cautions}
    assert code not in {c.code for c in answer(not_called).cautions}


@pytest.mark.parametrize("job", [JETTY, CABIN, SKIFF], ids=["A", "D", "E"])
def test_every_job_is_told_of_arcs_batteries_and_the_law(job):
    said = answer(job).cautions
    codes = [c.code for c in said]
    assert codes[0] == "dc_arc"
    assert "battery_fault_current" in codes
    assert codes[-1] == "law"
    assert [c.rank for c in said] == list(range(1, len(said) + 1))


# --- what else the site needs, and the simpler part -------------------------------------------------------------------


def test_the_verdict_asks_for_a_regulator_where_the_array_would_overcharge_the_bank():
    weak, strong = answer(YEAR, controller="direct", battery_ah=1000), answer(YEAR, controller="direct")
    assert "charge regulator" in strong.verdict.sentence  # 1.25 × 5.9 A against 3 % of 100 Ah
    assert "charge regulator" not in weak.verdict.sentence  # 7.4 A against 30 A


def test_the_verdict_asks_for_string_fuses_where_the_neighbours_feed_too_much():
    fused, safe = cabin(strings=4, max_series_fuse_a=15), cabin(strings=2, max_series_fuse_a=15)
    assert "Fuse every string" in answer(fused).verdict.sentence
    assert "Fuse every string" not in answer(safe).verdict.sentence


def test_a_plain_diode_as_good_as_an_active_rectifier_is_named(year):
    chosen = year.candidate(year.verdict.choice)
    assert chosen.technology == "active"
    plain = plain_equal(year.candidates, chosen)
    assert plain.technology != "active"
    assert plain.tied
    assert any(plain.title in line and "plain diode" in line for line in year.verdict.because)
    assert plain_equal(year.candidates, plain) is None


def test_a_controller_that_is_known_to_let_back_is_not_to_be_asked():
    def said(blocks):
        found = answer(YEAR, blocks_at_night=blocks).cautions
        return next(c.sentence for c in found if c.code == "controller_check")

    assert "read the manual" in said("unknown")
    assert "read the manual" not in said("no")
    assert "Never put the diode between" in said("no")


# --- refusals ---------------------------------------------------------------------------------------------------------

BAD = [
    ("preset", {"preset": "atlantis"}),
    ("preset", {"preset": None}),
    ("lat_deg", {"preset": None, "lat_deg": 95, "lon_deg": 0}),
    ("lon_deg", {"preset": None, "lat_deg": 45}),
    ("module_vmp_v", {"module_vmp_v": 25}),
    ("module_voc_v", {"module_voc_v": 5, "module_vmp_v": 4.2}),
    ("battery_nominal_v", {"battery_nominal_v": -12}),
    ("blocks_at_night", {"controller": "direct", "blocks_at_night": "yes"}),
    ("blocks_at_night", {"controller": "shunt", "blocks_at_night": "yes"}),
    ("candidates", {"candidates": ["1N9999X"]}),
    ("night_reading_v", {"night_reading_a": 0.01}),
    ("rth_c_per_w", {"heat_path": "stated"}),
    ("box_day_c", {"box": "stated"}),
    ("cable_mm2", {"cable_mm2": -4}),
    ("soiling_frac", {"soiling_frac": 2}),
    ("strings", {"strings": 0}),
    ("dark_days_per_month", {"dark_days_per_month": 31}),
    ("kt_monthly", {"climate": "monthly", "lat_deg": 45, "lon_deg": 0, "air_min_c_monthly": [5] * 12,
                    "air_max_c_monthly": [15] * 12}),
    ("kt_monthly", {"climate": "monthly", "lat_deg": 45, "lon_deg": 0, "air_min_c_monthly": [5] * 12,
                    "air_max_c_monthly": [15] * 12, "kt_monthly": [0.5] * 11}),
    ("peak_sun_h", {"climate": "stated_day", "daylight_h": 11, "day_air_c": 20, "night_air_c": 10}),
]  # fmt: skip


@pytest.mark.parametrize(("field", "changes"), BAD, ids=[f"{row[0]}-{i}" for i, row in enumerate(BAD)])
def test_what_cannot_be_computed_is_a_sentence_about_its_field(field, changes):
    with pytest.raises(InputError) as caught:
        answer(YEAR, **changes)
    assert caught.value.field == field
    assert len(caught.value.sentence.split()) > 4


def test_below_the_table_the_profile_says_so():
    cold = {**YEAR, "preset": "northway", "rule_profile": "cold_table", "record_low_c": -50}
    with pytest.raises(InputError, match="-40"):
        answer(cold)
    assert (
        answer(cold, voc_pct_per_c=-0.3, candidates=["MBR1045"]).facts.cold_voc_v > 26
    )  # the maker's coefficient wins


def test_a_study_is_deterministic():
    first, second = answer(YEAR, candidates=["MBR1045"]), answer(YEAR, candidates=["MBR1045"])
    assert replace(first, assumptions=()) == replace(second, assumptions=())
