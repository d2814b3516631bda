"""The file of printed facts: read in full, read right, and refused when it says what no diode does."""

import pickle
import tomllib

import pytest

from server.catalog.datasheet import FILE, ForwardPoint, ReversePoint, check_points, load_types, read_types
from server.errors import InputError


def by_name(name):
    return next(item for item in load_types() if item.type == name)


def test_the_file_holds_eighty_two_entries_and_one_hundred_and_twenty_four_sheets():
    raw = tomllib.loads(FILE.read_text(encoding="utf-8"))["diode"]
    assert (len(raw), sum(len(entry["sheet"]) for entry in raw)) == (82, 124)  # as collected
    families = [entry for entry in raw if "members" in entry]
    assert len(load_types()) == 82 - len(families) + sum(len(entry["members"]) for entry in families)


# As printed on the sheets named: type, maker, forward (A, V, °C, kind), reverse (V, A, °C, kind).
PRINTED = [
    ("STPS340", "STMicroelectronics", (3, 0.57, 125, "max"), (40, 2e-3, 125, "typ")),
    ("1N5822", "Rectron", (3, 0.525, 25, "max"), (40, 0.2e-3, 25, "max")),
    ("20SQ045", "Lite-On Semiconductor", (20, 0.55, 25, "max"), (45, 0.1, 100, "max")),
    ("S10P45", "HY Electronic", (10, 0.41, 125, "typ"), (45, 21e-6, 25, "typ")),
    ("C5D50065D", "Wolfspeed", (50, 2.2, 175, "max"), (400, 6e-6, 175, "typ")),
    ("SBA340AL", "PanJit", (0.01, 0.21, 25, "typ"), (20, 21e-6, 25, "typ")),
]


@pytest.mark.parametrize(("name", "maker", "forward", "reverse"), PRINTED)
def test_points_are_as_printed(name, maker, forward, reverse):
    sheet = next(sheet for sheet in by_name(name).sheets if sheet.manufacturer == maker)
    assert ForwardPoint(*forward) in sheet.forward
    assert ReversePoint(*reverse) in sheet.reverse


def test_a_family_unfolds_into_the_members_its_note_names():
    ratings = {item.type: item.vrrm_v for item in load_types() if item.family == "1N5400-1N5408"}
    # The gaps (1N5403, 1N5405) are not in the note.
    assert ratings == {
        "1N5400": 50, "1N5401": 100, "1N5402": 200, "1N5404": 400, "1N5406": 600, "1N5407": 800, "1N5408": 1000,
    }  # fmt: skip


def test_leakage_printed_at_rated_voltage_moves_with_the_member():
    for name, vrrm_v in (("1N4001", 50), ("1N4006", 800)):
        assert {p.reverse_v for sheet in by_name(name).sheets for p in sheet.reverse} == {vrrm_v}


def test_a_sheet_of_the_1600_v_sister_counts_at_the_800_v_rating():
    # Its note: the sheet of the 800 V member gives the same pair at 800 V.
    sister = by_name("DSI45-08A").sheets[1]
    assert (sister.part_number, {p.reverse_v for p in sister.reverse}) == ("DSI45-16A", {800})


def test_an_ambiguous_name_takes_the_lower_of_its_two_meanings():
    assert by_name("6A10").vrrm_v == 100  # 1000 V in one numbering, 100 V in the other


def test_every_sheet_says_where_it_was_read():
    for item in load_types():
        for sheet in item.sheets:
            assert sheet.title, item.type
            assert sheet.url or sheet.document_number, item.type
            assert sheet.read, item.type


def test_types_travel_between_processes():
    assert pickle.loads(pickle.dumps(load_types())) == load_types()


GOOD_V = ForwardPoint(1, 0.5, 25, "max")
GOOD_A = ReversePoint(40, 1e-4, 25, "max")
BAD = [
    ([ForwardPoint(3, 50, 25, "max")], [], "forward", "50 V"),
    ([ForwardPoint(-3, 0.5, 25, "max")], [], "forward", "-3 A"),
    ([ForwardPoint(3, float("nan"), 25, "max")], [], "forward", "nan"),
    ([ForwardPoint(3, 0.5, 250, "max")], [], "forward", "250 °C"),
    ([ForwardPoint(3, 0.5, 25, "min")], [], "forward", "'min'"),
    ([GOOD_V, ForwardPoint(1, 0.6, 25, "max")], [], "forward", "given twice"),
    ([GOOD_V, ForwardPoint(2, 0.4, 25, "max")], [], "forward", "falls from 0.5 V"),
    ([GOOD_V, ForwardPoint(1, 0.6, 25, "typ")], [], "forward", "above the maximum 0.5 V"),
    ([ForwardPoint(1 + i, 0.5, 25, "max") for i in range(41)], [], "forward", "41 points"),
    ([], [ReversePoint(40, -1e-4, 25, "max")], "reverse", "-0.0001 A"),
    ([], [ReversePoint(40, 20, 25, "max")], "reverse", "20 A"),
    ([], [ReversePoint(0, 1e-4, 25, "max")], "reverse", "0 V"),
    ([], [ReversePoint(60, 1e-4, 25, "max")], "reverse", "rating of 45 V"),
    ([], [GOOD_A, ReversePoint(40, 2e-4, 25, "max")], "reverse", "given twice"),
    ([], [GOOD_A, ReversePoint(20, 2e-4, 25, "max")], "reverse", "must not fall"),
    ([], [GOOD_A, ReversePoint(40, 2e-4, 25, "typ")], "reverse", "above the maximum"),
]


@pytest.mark.parametrize(("forward", "reverse", "field", "words"), BAD)
def test_points_that_no_diode_has_are_refused_in_a_sentence(forward, reverse, field, words):
    with pytest.raises(InputError) as refused:
        check_points(forward, reverse, 45)
    assert refused.value.field == field
    assert words in refused.value.sentence


def test_good_points_pass_and_may_repeat_themselves():
    check_points([GOOD_V, GOOD_V], [GOOD_A, GOOD_A], 45)


ENTRY = """
[[diode]]
type = "X1"
technology = "schottky"
dies = 1
vrrm_v = 40
[[diode.sheet]]
manufacturer = "Maker"
part_number = "X1"
title = "t"
read = true
"""


@pytest.mark.parametrize(
    ("text", "words"),
    [
        (ENTRY + "forward = [{a = 1, v = 50, c = 25, kind = 'max'}]", "50 V"),
        (ENTRY + "forward = [{a = 1, c = 25, kind = 'max'}]", "'v'"),
        (ENTRY + "colour = 'red'", "colour"),
        (ENTRY + "if_av_at = 'moon'", "moon"),
        (ENTRY + "tj_max_c = -5", "tj_max_c"),
        (ENTRY.replace("schottky", "valve"), "valve"),
        (ENTRY + ENTRY, "twice"),
    ],
)
def test_a_bad_file_names_the_entry(tmp_path, text, words):
    path = tmp_path / "bad.toml"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(ValueError, match="X1") as refused:
        read_types(path)
    assert words in str(refused.value)
