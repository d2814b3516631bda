"""Any job that the boundary lets through is answered, or refused in a sentence: never anything else."""

import math
from dataclasses import fields, is_dataclass

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from worked_jobs import CLASSES

from server.errors import InputError
from server.selection import study
from server.web.schemas import JobIn

NUMBER = {"allow_nan": False, "allow_infinity": False}


def some(low, high):
    return st.none() | st.floats(low, high, **NUMBER)


MODULES = st.builds(
    lambda voc, isc, v, i: {
        "module_voc_v": voc,
        "module_isc_a": isc,
        "module_vmp_v": voc * v,
        "module_imp_a": isc * i,
    },
    st.floats(0.5, 400, **NUMBER),
    st.floats(0.002, 90, **NUMBER),
    st.floats(0.70, 0.88, **NUMBER),
    st.floats(0.85, 0.97, **NUMBER),
)
PLACES = st.one_of(
    st.builds(
        lambda la, lo: {"lat_deg": la, "lon_deg": lo}, st.floats(-90, 90, **NUMBER), st.floats(-180, 180, **NUMBER)
    ),
    st.sampled_from([{"preset": p} for p in ("singapore", "northway", "el_alto", "sydney")]),
    st.builds(
        lambda sun, day, air, night: {"peak_sun_h": sun, "daylight_h": day, "day_air_c": air, "night_air_c": night},
        st.floats(0, 9, **NUMBER),
        st.floats(0.5, 24, **NUMBER),
        st.floats(-50, 55, **NUMBER),
        st.floats(-60, 45, **NUMBER),
    ),
)
REST = st.fixed_dictionaries(
    {
        "chemistry": st.sampled_from(["flooded", "agm", "gel", "lifepo4", "li_ion", "nicd", "nimh"]),
        "battery_nominal_v": st.sampled_from([1.2, 3.7, 6, 12, 24, 36, 48, 110]),
        "battery_ah": some(0.01, 1e5),
        "controller": st.sampled_from(["direct", "shunt", "series", "mppt"]),
    },
    optional={
        "blocks_at_night": st.sampled_from(["no", "unknown", "yes"]),
        "controller_night_a": st.floats(0, 0.1, **NUMBER),
        "modules_in_series": st.integers(1, 30),
        "strings": st.integers(1, 40),
        "cell_type": st.sampled_from(["mono", "poly", "heterojunction", "thin_film"]),
        "soiling_frac": st.floats(0, 0.9, **NUMBER),
        "mismatch_frac": st.floats(0, 0.5, **NUMBER),
        "dark_current": st.sampled_from(["low", "middle", "high"]),
        "dark_days_per_month": st.floats(0, 28, **NUMBER),
        "tilt_deg": st.floats(0, 90, **NUMBER),
        "azimuth_deg": st.floats(0, 360, **NUMBER),
        "mounting": st.sampled_from(["open_rack", "roof_gap", "flat_insulated"]),
        "loop_ohm": st.floats(0, 50, **NUMBER),
        "battery_internal_ohm": st.floats(0, 1, **NUMBER),
        "placement": st.sampled_from(["per_string", "array"]),
        "legs": st.sampled_from(["one", "both"]),
        "earthing": st.sampled_from(["negative", "positive", "floating"]),
        "box": st.sampled_from(["open_shade", "light_box", "dark_box", "junction_box", "engine_room"]),
        "heat_path": st.sampled_from(["as_packaged", "free_air", "leads", "heatsink"]),
        "sink_c_per_w": some(0, 50),
        "rule_profile": st.sampled_from(["stress_only", "double_voc", "cold_table", "double_voc_max"]),
        "record_low_c": some(-60, 10),
        "altitude_m": some(-420, 5500),
        "max_series_fuse_a": some(1, 60),
    },
)
PARTS = {
    "candidates": ["1N5819", "10A4", "MBR20100CT", "C3D06060A", "LM74700-Q1 + IRF1010N", "KBPC3510", "SBA340AL"],
    "own_diodes": [CLASSES["S45"], CLASSES["PN35"]],
}


def no_infinity(value, where="study"):
    """Nothing in the answer is infinite, whatever may be missing (NaN) in it."""
    if isinstance(value, float):
        assert not math.isinf(value), where
    elif isinstance(value, tuple):
        for index, item in enumerate(value):
            no_infinity(item, f"{where}[{index}]")
    elif is_dataclass(value):
        for field in fields(value):
            if field.name not in ("part", "tipping_c"):
                no_infinity(getattr(value, field.name), f"{where}.{field.name}")


@settings(max_examples=120, deadline=None, suppress_health_check=[HealthCheck.too_slow])
@given(module=MODULES, place=PLACES, rest=REST)
def test_any_job_is_answered_or_refused_in_a_sentence(module, place, rest):
    values = {name: value for name, value in {**module, **place, **rest, **PARTS}.items() if value is not None}
    try:
        found = study.run(JobIn.model_validate(values).to_job())
    except InputError as refused:
        told = refused.field, len(refused.sentence)
    else:
        told = None
    if told is not None:
        assert told[0]
        assert told[1] > 10
        return
    assert found.verdict.sentence
    assert found.audit.worst_imbalance_frac < 1e-9
    no_infinity(found)
    for item in found.candidates:
        if item.standing in ("pass", "marginal", "confirm"):
            assert all(math.isfinite(x) for x in item.typical.net_wh), item.key
            assert item.typical.year_night_drain_ah >= 0
            assert item.typical.year_heat_wh >= 0
