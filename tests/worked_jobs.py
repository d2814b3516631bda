"""Invented sites with classes of diodes, entered as own parts: what the tests of the whole study start from."""

from typing import Any


def _points(*points: tuple[float, float]) -> list[dict[str, Any]]:
    return [{"current_a": a, "voltage_v": v, "junction_c": 25.0, "kind": "typ"} for a, v in points]


def _leak(
    vrrm_v: float, cold_ma: tuple[float, float], hot_ma: tuple[float, float], hot_c: float
) -> list[dict[str, Any]]:
    rows = []
    for junction_c, pair in ((25.0, cold_ma), (hot_c, hot_ma)):
        for kind, value in zip(("typ", "max"), pair, strict=True):
            rows.append({"reverse_v": vrrm_v, "current_a": value / 1e3, "junction_c": junction_c, "kind": kind})
    return rows


def _class(
    name: str,
    technology: str,
    vrrm_v: float,
    forward: list[dict[str, Any]],
    tc_mv_per_k: float,
    reverse: list[dict[str, Any]],
    **ratings: Any,
) -> dict[str, Any]:
    return {
        "name": name,
        "technology": technology,
        "vrrm_v": vrrm_v,
        "forward": forward,
        "reverse": reverse,
        "ideality": 1.7 if technology == "pn_silicon" else 1.1,
        "forward_slope_v_per_k": tc_mv_per_k / 1e3,
        "leakage_exponent": 0.7,
        **ratings,
    }


# Class parameters: forward drop at 25 °C, its slope, leakage at VRRM typical and maximum, cold and hot.
CLASSES: dict[str, dict[str, Any]] = {
    "S45": _class(
        "S45",
        "schottky",
        45,
        _points((1, 0.34), (15, 0.52)),
        -1.0,
        _leak(45, (0.08, 0.5), (8, 50), 100),
        tj_max_c=125,
        rth_ja_c_per_w=28,
    ),
    "S60": _class(
        "S60",
        "schottky",
        60,
        _points((1, 0.42), (10, 0.62)),
        -1.2,
        _leak(60, (0.03, 0.3), (4, 25), 100),
        tj_max_c=150,
        rth_ja_c_per_w=28,
    ),
    "S100": _class(
        "S100",
        "schottky",
        100,
        _points((2, 0.56), (20, 0.82)),
        -1.4,
        _leak(100, (0.006, 0.2), (2, 12), 125),
        tj_max_c=150,
        rth_jc_c_per_w=1.5,
        tab_live=True,
    ),
    "S200": _class(
        "S200",
        "schottky",
        200,
        _points((2, 0.66), (20, 0.90)),
        -1.5,
        _leak(200, (0.004, 0.1), (2, 20), 125),
        tj_max_c=150,
        rth_jc_c_per_w=1.5,
        tab_live=True,
    ),
    "PN10": _class(
        "PN10",
        "pn_silicon",
        1000,
        _points((1, 0.74), (10, 0.95)),
        -1.7,
        _leak(1000, (1e-4, 0.01), (0.02, 0.1), 100),
        tj_max_c=175,
        rth_ja_c_per_w=15,
    ),
    "PN35": _class(
        "PN35",
        "pn_silicon",
        1000,
        _points((1, 0.72), (17.5, 1.00)),
        -1.7,
        _leak(1000, (2e-4, 0.01), (0.05, 0.2), 100),
        tj_max_c=150,
        rth_jc_c_per_w=1.5,
        tab_live=False,
    ),
    "ID": {
        "name": "ID",
        "technology": "active",
        "vrrm_v": 65,
        "active": {
            "regulated_v": 0.02,
            "rds_on_ohm": 0.005,
            "leakage_a": 2e-6,
            "leakage_max_a": 50e-6,
            "leakage_ref_v": 65,
            "supply_a": 80e-6,
        },
        "tj_max_c": 150,
        "rth_ja_c_per_w": 40,
    },
}


def launch(day_v: float = 13.0, air_c: float = 20.0, **changes: Any) -> dict[str, Any]:
    """A: one 36-cell module on a jetty, 12 V flooded, a regulator that shorts the panel."""
    return {
        "module_voc_v": 22.0, "module_isc_a": 5.9, "module_vmp_v": 18.2, "module_imp_a": 5.5, "cells": 36,
        "voc_pct_per_c": -0.31, "chemistry": "flooded", "battery_nominal_v": 12, "battery_ah": 110,
        "battery_night_v": 12.7, "battery_day_v": day_v, "battery_absorption_v": 14.4, "battery_highest_v": 15.5,
        "controller": "shunt", "peak_sun_h": 4.2, "daylight_h": 11, "day_air_c": air_c, "night_air_c": 22,
        "record_low_c": -5, "loop_ohm": 0.055, "box": "stated", "box_day_c": 45, "box_night_c": 22,
        "heat_path": "stated", "rth_c_per_w": 15,
        "own_diodes": [CLASSES["S45"], CLASSES["S60"], CLASSES["PN10"], CLASSES["ID"]],
        **changes,
    }  # fmt: skip


def repeater(**changes: Any) -> dict[str, Any]:
    """B: four strings of two 72-cell modules on 48 V, a series regulator that may or may not block."""
    return {
        "module_voc_v": 45.6, "module_isc_a": 9.8, "module_vmp_v": 37.3, "module_imp_a": 9.2, "cells": 72,
        "voc_pct_per_c": -0.29, "modules_in_series": 2, "strings": 4, "chemistry": "agm", "battery_nominal_v": 48,
        "battery_night_v": 51, "controller": "series", "blocks_at_night": "unknown", "peak_sun_h": 6.2,
        "daylight_h": 12.5, "day_air_c": 35, "night_air_c": 38, "record_low_c": 0, "loop_ohm": 0.0, "box": "stated",
        "box_day_c": 65, "box_night_c": 38, "junction_limit_c": 125, "heat_path": "heatsink", "interface_c_per_w": 1.0,
        "rule_profile": "double_voc",
        "own_diodes": [CLASSES[k] for k in ("S45", "S60", "S100", "S200", "PN35", "ID")],
        **changes,
    }  # fmt: skip


def cabin(**changes: Any) -> dict[str, Any]:
    """D: two strings of two 60-cell modules behind a maximum-power converter, 24 V LiFePO4."""
    return {
        "module_voc_v": 39.5, "module_isc_a": 9.8, "module_vmp_v": 32.7, "module_imp_a": 9.3, "cells": 60,
        "max_series_fuse_a": 15, "modules_in_series": 2, "strings": 2, "chemistry": "lifepo4",
        "battery_nominal_v": 24, "battery_night_v": 26.4, "controller": "mppt", "peak_sun_h": 4.5, "daylight_h": 11,
        "day_air_c": 20, "night_air_c": 10, "record_low_c": -10, "loop_ohm": 0.0, "rule_profile": "double_voc",
        "box": "stated", "box_day_c": 40, "box_night_c": 10,
        "own_diodes": [CLASSES[k] for k in ("S45", "S100", "ID")],
        **changes,
    }  # fmt: skip


def skiff(day_v: float = 13.0, air_c: float = 20.0, **changes: Any) -> dict[str, Any]:
    """E: one 33-cell module, no controller, on a moored boat."""
    return {
        "module_voc_v": 19.8, "module_isc_a": 3.05, "module_vmp_v": 15.6, "module_imp_a": 2.88, "cells": 33,
        "chemistry": "flooded", "battery_nominal_v": 12, "battery_ah": 105, "battery_night_v": 12.8,
        "battery_day_v": day_v, "controller": "direct", "peak_sun_h": 4.5, "daylight_h": 11, "day_air_c": air_c,
        "night_air_c": 22, "record_low_c": 2, "loop_ohm": 0.05,
        "own_diodes": [CLASSES[k] for k in ("ID", "S45", "PN10")],
        **changes,
    }  # fmt: skip
