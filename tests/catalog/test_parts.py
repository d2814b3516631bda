"""Parts: every printed point met, corners in order, sheets merged on the safe side, names found."""

import pickle
from dataclasses import replace

import numpy as np
import pytest

from server.catalog.corners import raised_maximum
from server.catalog.datasheet import load_types
from server.catalog.part import tab_live
from server.catalog.parts import fit_type, load_parts, part, unfitted
from server.errors import InputError
from server.physics.diode import DiodeCells, JunctionLaw, current_a, forward_drop_v, reverse_a

PARTS = load_parts()
JUNCTIONS = [item for item in PARTS if item.technology != "active"]
ONE_SHEET = [item for item in JUNCTIONS if len(item.sheets) == 1]


def named(item):
    return item.type


def cells(item):
    return DiodeCells.of([item.typical, item.maximum])


@pytest.mark.parametrize("item", JUNCTIONS, ids=named)
def test_a_part_meets_its_printed_points_within_its_stated_misfit(item):
    """The misfit is recomputed here from the sheets and the laws, point by point."""
    law = {"typ": item.typical, "max": item.maximum}
    points = 0
    for sheet in item.sheets:
        for p in sheet.forward:
            ours = forward_drop_v(DiodeCells.of([law[p.kind]]), np.array(p.current_a), np.array(p.junction_c))[0]
            assert abs(ours - p.voltage_v) <= item.fit.forward_misfit_v + 1e-9
            points += 1
        for p in sheet.reverse:
            ours = reverse_a(DiodeCells.of([law[p.kind]]), np.array(p.reverse_v), np.array(p.junction_c))[0]
            assert abs(np.log(ours / p.current_a)) <= item.fit.leakage_misfit_log + 1e-9
            points += 1
    assert points == len(item.fit.misfits)


@pytest.mark.parametrize("item", ONE_SHEET, ids=named)
def test_misfit_of_a_single_sheet_is_small(item):
    # Drops are printed to 10 mV and leakage to one or two digits; a sheet whose columns cross or bend (STPS8L30) costs
    # more. The leakage of C5D50065D grows with VR^5.2 at 25 °C and VR^7.2 at 175 °C: one exponent lies between.
    assert item.fit.forward_misfit_v < 0.020
    assert item.fit.leakage_misfit_log < np.log(1.4)


def test_most_single_sheets_are_met_to_their_last_digit():
    assert sum(item.fit.forward_misfit_v < 0.005 for item in ONE_SHEET) > 0.9 * len(ONE_SHEET)
    assert sum(item.fit.leakage_misfit_log < 0.02 for item in ONE_SHEET) > 0.85 * len(ONE_SHEET)


def test_a_printed_typical_leakage_is_kept_and_the_maximum_gives_way():
    # SBR30A45CT, typical: 0.26 mA at 25 °C and 65 mA at 125 °C, both at 45 V.
    item = part("SBR30A45CT")
    ours_a = reverse_a(cells(item), np.array(45.0), np.array([[25.0], [125.0]]))[:, 0]
    assert ours_a == pytest.approx([0.26e-3, 65e-3], rel=0.01)


def test_a_flat_printed_typical_lifts_the_maximum_below_its_rating_only():
    typical = JunctionLaw(1e-6, 1.05, 0.67, 2.0, 0.01, 0.0, 0.26e-3, 45.0, 0.2, 0.6)
    maximum = JunctionLaw(1e-6, 1.05, 0.67, 2.0, 0.01, 0.0, 0.30e-3, 45.0, 0.7, 0.6)
    raised = raised_maximum(typical, maximum, 45.0)
    at_5_v, at_45_v = (
        reverse_a(DiodeCells.of([typical, maximum, raised]), np.array(v), np.array(25.0)) for v in (5, 45)
    )
    assert at_5_v[1] < at_5_v[0] <= at_5_v[2]
    assert at_45_v[2] == pytest.approx(0.30e-3)


def test_a_maximum_printed_at_one_voltage_never_falls_faster_than_the_class():
    # SBA340AL: 0.15 mA at 40 V; its typical column falls steeper, but at 10 V 0.15·0.25^0.7 = 0.0568 mA must remain.
    assert reverse_a(cells(part("SBA340AL")), np.array(10.0), np.array(25.0))[1] > 0.0555e-3


SWEEP_C = (0.0, 25.0, 45.0, 60.0, 85.0, 100.0)


@pytest.mark.parametrize("item", PARTS, ids=named)
def test_a_typical_part_is_never_worse_than_a_maximum_one(item):
    volts = np.geomspace(5.0, item.vrrm_v, 20)[:, None]
    top_a = item.if_av_a or 10.0
    for celsius in SWEEP_C:
        typ_a, max_a = reverse_a(cells(item), volts, np.array(celsius)).T
        assert np.all(typ_a <= np.maximum(max_a, 1e-9) * (1 + 1e-6)), celsius  # under a nanoampere decides nothing
        typ_v, max_v = forward_drop_v(cells(item), np.geomspace(0.01, 1, 20)[:, None] * top_a, np.array(celsius)).T
        assert np.all(typ_v <= max_v + 1e-3), celsius


@pytest.mark.parametrize("item", PARTS, ids=named)
def test_current_rises_with_voltage_and_leakage_with_heat(item):
    volts = np.linspace(-item.vrrm_v, 0.3, 400)[:, None]
    for celsius in SWEEP_C:
        assert np.all(np.diff(current_a(cells(item), volts, np.array(celsius)), axis=0) > 0)
    leakage_a = reverse_a(cells(item), np.array(0.8 * item.vrrm_v), np.array(SWEEP_C)[:, None])
    assert np.all(np.diff(leakage_a, axis=0) > 0)


@pytest.mark.parametrize("item", [item for item in JUNCTIONS if len(item.sheets) > 1], ids=named)
def test_several_sheets_give_the_worst_as_maximum(item):
    for sheet in item.sheets:
        hottest = max((p.junction_c for p in sheet.reverse), default=None)
        for p in sheet.reverse:
            if p.kind == "max" and p.junction_c in (25, hottest):
                ours = reverse_a(cells(item), np.array(p.reverse_v), np.array(p.junction_c))[1]
                assert ours > 0.95 * p.current_a  # at 100 °C the line may pass a little under a sheet's own point
        for p in sheet.forward:
            if p.kind == "max" and p.junction_c == 25 and p.current_a <= item.if_av_a:
                ours = forward_drop_v(cells(item), np.array(p.current_a), np.array(25.0))[1]
                assert ours > p.voltage_v - 0.015
    assert any(f"{len([s for s in item.sheets if s.forward or s.reverse])} sheets" in words for words in item.assumed)


def test_sheets_that_differ_more_than_twofold_are_reported():
    remarks = [remark.sentence for remark in part("MBR20100CT").warnings if remark.code == "sheets_disagree"]
    # Printed at 100 V, 125 °C: 5 mA (Taiwan Semiconductor), 150 mA (onsemi), 100 mA (STMicroelectronics).
    assert len(remarks) == 1
    assert "5 mA (Taiwan Semiconductor) against 150 mA (onsemi)" in remarks[0]
    assert not [remark for remark in part("1N5818").warnings if remark.code == "sheets_disagree"]


def test_the_typical_part_of_several_sheets_lies_within_their_spread():
    base = next(item for item in load_types() if item.type == "SB540")
    alone = [fit_type(replace(base, sheets=(sheet,))).typical for sheet in base.sheets]
    together = part("SB540").typical
    low, middle, high = sorted(
        float(reverse_a(DiodeCells.of([law]), np.array(40.0), np.array(25.0))[0]) for law in (*alone, together)
    )
    assert middle == pytest.approx(np.sqrt(low * high), rel=0.01)  # the median of two, in the logarithm


def test_ratings_are_the_most_cautious_of_the_sheets():
    # 1N5822, five sheets as printed: Tj 150, 125, 150, 125, 125; RthJA 80, 40, 40, 40; RthJL 25, 10, 10, 20.
    item = part("1N5822")
    assert (item.tj_max_c, item.rth_ja_c_per_w, item.rth_jl_c_per_w, item.ifsm_a) == (125, 80, 25, 80)
    assert (item.if_av_a, item.if_av_at, item.if_av_at_c) == (3, "lead", 95)
    # MBR20100CT: 20 A per device and 10 A per leg on three sheets say the same; the lowest case temperature is 110 °C.
    item = part("MBR20100CT")
    assert (item.if_av_a, item.if_av_per, item.if_av_at_c, item.tj_max_c, item.rth_jc_c_per_w) == (
        10,
        "leg",
        110,
        150,
        3.5,
    )


def test_a_junction_limit_that_is_not_printed_is_taken_low_and_said():
    item = part("MBR4045PT")
    assert item.tj_max_c == 125
    assert any("junction limit" in words for words in item.assumed)
    printed = [sheet.tj_max_c for other in JUNCTIONS for sheet in other.sheets if sheet.tj_max_c is not None]
    assert min(printed) == 125


def test_forward_only_limits_do_not_raise_the_blocking_one():
    assert (part("10SQ050").tj_max_c, part("10SQ050").tj_max_forward_only_c) == (125, 200)


def test_every_type_is_a_part_or_says_why_not():
    told = {item.type for item in PARTS} | {item.type for item in unfitted()}
    assert {item.type for item in load_types()} <= told
    # The four whose sheets could not be read far enough, by hand from the collection: no leakage, or no temperature.
    reasons = {item.type: item.reason for item in unfitted() if item.technology != "active"}
    assert set(reasons) == {"1N1183", "1N1190", "MDK600-16N1", "VBT1045BP", "SBR60A60CT"}
    assert "junction temperature" in reasons["MDK600-16N1"]
    assert "no leakage point" in reasons["VBT1045BP"]


def test_a_part_is_found_in_any_case_and_by_its_key():
    assert part("stps340").type == part(" STPS340 ").type == "STPS340"
    assert part("lm74700-q1-irf1010n").type == "LM74700-Q1 + IRF1010N"
    keys = [item.key for item in PARTS]
    assert len(set(keys)) == len(keys)


def test_an_unknown_name_offers_close_ones_and_an_unfitted_one_its_reason():
    with pytest.raises(InputError, match="1N5822") as refused:
        part("1N5882")
    assert refused.value.field == "candidates"
    with pytest.raises(InputError, match="no leakage point"):
        part("VBT1045BP")
    with pytest.raises(InputError, match=r"not in the catalogue$"):
        part("zzzz" * 50)


# Package practice of the trade: the tab is the cathode unless the case is insulated; axial parts have none.
@pytest.mark.parametrize(
    ("package", "live"),
    [
        ("TO-220AB, common cathode", True),
        ("TO-263 (D2PAK), common cathode", True),
        ("TO-244 module, common cathode", True),
        ("SMPD, isolated", False),
        ("TO-220-F2 (full pack)", False),
        ("isolated-base bridge, 4 diodes", False),
        ("SOT-227B (miniBLOC), two isolated diodes", False),
        ("DO-41", None),
        ("DO-204AR axial", None),
        ("DO-5 stud (DO-203AB)", True),
        (None, None),
    ],
)
def test_a_tab_is_live_unless_isolated_or_absent(package, live):
    assert tab_live(package) is live


def test_parts_travel_between_processes():
    assert pickle.loads(pickle.dumps(PARTS)) == PARTS


def test_a_sheet_of_the_users_own_takes_the_same_door():
    base = next(item for item in load_types() if item.type == "STPS340")
    sheet = base.sheets[0]
    bad = replace(sheet, reverse=(replace(sheet.reverse[0], current_a=-1.0),))
    with pytest.raises(InputError) as refused:
        fit_type(replace(base, sheets=(bad,)))
    assert refused.value.field == "reverse"
    assert fit_type(replace(base, type="mine"), leakage_exponent=1.0).typical.leakage_exponent == pytest.approx(1.0)


# Common practice of the trade, no document: what a bench meter shows.
SMALL_SILICON = ("1N4001", "1N4002", "1N4003", "1N4004", "1N4005", "1N4006")
SMALL_SCHOTTKY = ("1N5818", "1N5819", "STPS140", "STPS1L40", "1N5820", "1N5822", "SK34A", "SBM345VMS")


@pytest.mark.parametrize("name", SMALL_SILICON)
def test_a_small_silicon_diode_drops_0_6_to_0_7_v_at_light_load(name):
    drop_v = forward_drop_v(cells(part(name)), np.array([[0.01], [0.05]]), np.array(25.0))[:, 0]
    assert np.all((drop_v > 0.58) & (drop_v < 0.75))


@pytest.mark.parametrize("name", SMALL_SCHOTTKY)
def test_a_small_schottky_drops_0_15_to_0_4_v_at_light_load(name):
    drop_v = forward_drop_v(cells(part(name)), np.array([[0.01], [0.1]]), np.array(25.0))[:, 0]
    assert np.all((drop_v > 0.1) & (drop_v < 0.4))


@pytest.mark.parametrize("name", SMALL_SILICON)
def test_a_small_silicon_diode_shows_nothing_on_a_microammeter(name):
    assert reverse_a(cells(part(name)), np.array(5.0), np.array(20.0))[0] < 0.1e-6


def test_a_small_schottky_shows_about_a_microampere():
    # 1.59 µA at 5 V, room temperature: one such value of common practice; parts differ by an order of magnitude.
    shown_a = [reverse_a(cells(part(name)), np.array(5.0), np.array(20.0))[0] for name in SMALL_SCHOTTKY]
    assert 0.3e-6 < np.median(shown_a) < 16e-6


def test_common_silicon_schottky_types_of_fifty_volts_or_less_exist():
    assert sum(item.technology == "schottky" and item.vrrm_v <= 50 for item in PARTS) > 10
