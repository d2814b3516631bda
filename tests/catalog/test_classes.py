"""Class values that are medians of the catalogue, recomputed here straight from the file, without our reader."""

import math
import tomllib
from statistics import median

import pytest

from server.catalog import classes
from server.catalog.datasheet import FILE

SHEETS = [
    (entry["technology"], sheet)
    for entry in tomllib.loads(FILE.read_text(encoding="utf-8"))["diode"]
    for sheet in entry["sheet"]
]


def pairs_typ_max(sheet, name, at, value):
    """(typical, maximum, °C) wherever a sheet prints both at one condition."""
    table = {(p[at], p.get("c"), p["kind"]): p[value] for p in sheet.get(name, ())}
    return [
        (table[x, c, "typ"], table[x, c, "max"], c) for x, c, kind in table if kind == "typ" and (x, c, "max") in table
    ]


def by_technology(one_per_sheet):
    """{technology: (median, sheets)}, with "all"; a sheet counts once, by the median of its own pairs."""
    found = {}
    for technology, sheet in SHEETS:
        values = one_per_sheet(technology, sheet)
        if values:
            for key in (technology, "all"):
                found.setdefault(key, []).append(median(values))
    return {key: (median(values), len(values)) for key, values in found.items()}


def assert_named(table, found, counts):
    assert {key: found[key][1] for key in counts} == counts
    for key, value in table.items():
        assert value == pytest.approx(found[key][0], abs=0.0006), key
    enough = {key for key, (_, sheets) in found.items() if sheets >= 3}
    assert set(table) == enough  # three sheets or more: a class of its own


def test_cold_typical_leakage_over_maximum_is_the_median_of_seven_sheets():
    found = by_technology(lambda _, s: [t / m for t, m, c in pairs_typ_max(s, "reverse", "v", "a") if c == 25])
    assert_named(classes.COLD_RATIO, found, {"all": 7, "sic_schottky": 3})


def test_hot_typical_leakage_over_maximum_is_the_median_of_seventeen_sheets():
    found = by_technology(
        lambda _, s: [t / m for t, m, c in pairs_typ_max(s, "reverse", "v", "a") if c >= classes.HOT_C]
    )
    assert_named(classes.HOT_RATIO, found, {"all": 17, "schottky": 11, "sic_schottky": 3})


def test_maximum_drop_above_typical_is_the_median_of_twenty_five_sheets():
    found = by_technology(lambda _, s: [m - t for t, m, _c in pairs_typ_max(s, "forward", "a", "v")])
    assert_named(classes.DROP_OFFSET_V, found, {"all": 25, "schottky": 16, "super_barrier": 4, "sic_schottky": 3})


def test_the_gap_between_columns_grows_half_as_much_again_when_the_current_doubles():
    def growth(_, sheet):
        gaps = {}
        table = {(p["a"], p["c"], p["kind"]): p["v"] for p in sheet.get("forward", ()) if "c" in p}
        for a, c, kind in table:
            if kind == "typ" and (a, c, "max") in table:
                gaps.setdefault(c, {})[a] = table[a, c, "max"] - table[a, c, "typ"]
        return [gap[max(gap)] / gap[min(gap)] for gap in gaps.values() if len(gap) > 1]

    value, sheets = by_technology(growth)["all"]
    assert (round(value, 2), sheets) == (1.5, 11)


def test_series_drop_is_the_median_left_by_two_currents_of_one_column():
    def series_drop_v(technology, sheet):
        n = classes.CLASSES[technology].ideality if technology in classes.CLASSES else None
        column = sorted((p["a"], p["v"]) for p in sheet.get("forward", ()) if p["kind"] == "max" and p.get("c") == 25)
        if n is None or len(column) < 2:
            return []
        (i1, v1), (i2, v2) = column[0], column[-1]
        return [(v2 - v1 - n * 0.025693 * math.log(i2 / i1)) / (i2 - i1) * i1]

    found = by_technology(series_drop_v)
    assert_named(classes.SERIES_DROP_V, found, {"all": 50, "schottky": 46, "pn_silicon": 3})


def test_the_ratios_stand_in_the_class_records():
    assert classes.CLASSES["trench_schottky"].hot_ratio == classes.HOT_RATIO["all"]
    assert classes.CLASSES["schottky"].hot_ratio == classes.HOT_RATIO["schottky"]
    assert classes.CLASSES["sic_schottky"].drop_offset_v == classes.DROP_OFFSET_V["sic_schottky"]
