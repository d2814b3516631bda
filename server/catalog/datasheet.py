"""What makers print: reads diodes.toml, checks it, and gives records. Nothing here is fitted."""

import functools
import math
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from server.errors import InputError

FILE = Path(__file__).with_name("diodes.toml")
TECHNOLOGIES = ("schottky", "trench_schottky", "super_barrier", "sic_schottky", "pn_silicon", "active")
KINDS = ("typ", "max")
REFERENCES = ("case", "lead", "ambient")
MAX_POINTS = 40

# What a point may be, so that a slipped decimal or a milliampere read as an ampere is refused, not fitted.
FORWARD_A = (1e-6, 5000.0)
FORWARD_V = (0.02, 5.0)
REVERSE_V = (0.1, 20000.0)
REVERSE_A = (1e-13, 10.0)
JUNCTION_C = (-65.0, 200.0)


@dataclass(frozen=True, slots=True)
class ForwardPoint:
    """One printed forward point. `junction_c` is None where the sheet's footnote could not be read."""

    current_a: float
    voltage_v: float
    junction_c: float | None
    kind: str


@dataclass(frozen=True, slots=True)
class ReversePoint:
    """One printed leakage point. `junction_c` is None where the sheet's footnote could not be read."""

    reverse_v: float
    current_a: float
    junction_c: float | None
    kind: str


@dataclass(frozen=True, slots=True)
class Sheet:
    """One data sheet of one maker, as printed. None: not on the part that could be read."""

    manufacturer: str
    part_number: str
    title: str
    read: bool
    document_number: str | None = None
    revision: str | None = None
    date: str | None = None
    url: str | None = None
    vrrm_v: float | None = None
    if_av_a: float | None = None
    if_av_at: str | None = None
    if_av_at_c: float | None = None
    if_av_per: str = "package"
    if_av_note: str | None = None
    ifsm_a: float | None = None
    ifsm_pulse_ms: float | None = None
    ifsm_note: str | None = None
    tj_max_c: float | None = None
    tj_max_forward_only_c: float | None = None
    rth_ja_c_per_w: float | None = None
    rth_jl_c_per_w: float | None = None
    rth_jc_c_per_w: float | None = None
    rth_note: str | None = None
    forward: tuple[ForwardPoint, ...] = ()
    reverse: tuple[ReversePoint, ...] = ()
    junction_capacitance: Mapping[str, Any] | None = None
    conduction_loss: Mapping[str, Any] | None = None
    active: Mapping[str, float] | None = None
    note: str | None = None


@dataclass(frozen=True, slots=True)
class DiodeType:
    """One type and every sheet kept for it. `family` names the entry that a member of a family came from."""

    type: str
    technology: str
    package: str | None
    dies: int
    vrrm_v: float | None
    sheets: tuple[Sheet, ...]
    note: str | None = None
    family: str | None = None
    active_role: str | None = None


def _within(field: str, what: str, value: float, bounds: tuple[float, float], unit: str) -> None:
    low, high = bounds
    if not low <= value <= high:  # also catches NaN
        raise InputError(field, f"{what} of {value:g} {unit} is outside {low:g} to {high:g} {unit}")


def _check_kind_and_junction(field: str, kind: str, junction_c: float | None) -> None:
    if kind not in KINDS:
        raise InputError(field, f"{kind!r} is neither 'typ' nor 'max'")
    if junction_c is not None:
        _within(field, "a junction temperature", junction_c, JUNCTION_C, "°C")


def _check_order(field: str, table: Mapping[tuple[float, float | None, str], float], what: str, unit: str) -> None:
    """Refuse a quantity that falls as its argument rises, or a typical above its maximum."""
    for (x, junction_c, kind), value in table.items():
        limit = table.get((x, junction_c, "max"))
        if kind == "typ" and limit is not None and value > limit:
            raise InputError(field, f"typical {what} {value:g} {unit} is above the maximum {limit:g} {unit} beside it")
        for (x2, junction2_c, kind2), value2 in table.items():
            if x2 > x and (junction2_c, kind2) == (junction_c, kind) and value2 < value:
                raise InputError(
                    field,
                    f"{kind} {what} falls from {value:g} {unit} at {x:g} to {value2:g} {unit} at {x2:g} "
                    f"at one temperature ({junction_c} °C); it must not fall",
                )


def check_points(forward: Sequence[ForwardPoint], reverse: Sequence[ReversePoint], vrrm_v: float | None = None) -> None:
    """Refuse points that no diode has: the one gate for the catalogue and for points that a user types in.

    Raises:  InputError, field "forward" or "reverse", with the value and the bound.
    """
    drops: dict[tuple[float, float | None, str], float] = {}
    for point in forward:
        _check_kind_and_junction("forward", point.kind, point.junction_c)
        _within("forward", "a forward current", point.current_a, FORWARD_A, "A")
        _within("forward", "a forward drop", point.voltage_v, FORWARD_V, "V")
        at = (point.current_a, point.junction_c, point.kind)
        if drops.setdefault(at, point.voltage_v) != point.voltage_v:
            raise InputError(
                "forward",
                f"{point.kind} drop at {at[0]:g} A, {at[1]} °C is given twice: {drops[at]:g} and {point.voltage_v:g} V",
            )
    leaks: dict[tuple[float, float | None, str], float] = {}
    for leak in reverse:
        _check_kind_and_junction("reverse", leak.kind, leak.junction_c)
        _within("reverse", "a reverse voltage", leak.reverse_v, REVERSE_V, "V")
        _within("reverse", "a leakage", leak.current_a, REVERSE_A, "A")
        if vrrm_v is not None and leak.reverse_v > vrrm_v * (1 + 1e-9):
            raise InputError("reverse", f"a leakage point at {leak.reverse_v:g} V is above the rating of {vrrm_v:g} V")
        at = (leak.reverse_v, leak.junction_c, leak.kind)
        if leaks.setdefault(at, leak.current_a) != leak.current_a:
            raise InputError(
                "reverse",
                f"{leak.kind} leakage at {at[0]:g} V, {at[1]} °C is given twice: "
                f"{leaks[at]:g} and {leak.current_a:g} A",
            )
    for field, points in (("forward", forward), ("reverse", reverse)):
        if len(points) > MAX_POINTS:
            raise InputError(field, f"{len(points)} points are more than the {MAX_POINTS} that a fit takes")
    _check_order("forward", drops, "drop", "V")
    _check_order("reverse", leaks, "leakage", "A")


def _sheet(entry: str, raw: Mapping[str, Any]) -> Sheet:
    """One [[diode.sheet]]; an unknown key, wrong reference or impossible number names the entry."""
    known = dict(raw)
    try:
        known["forward"] = tuple(ForwardPoint(p["a"], p["v"], p.get("c"), p["kind"]) for p in raw.get("forward", ()))
        known["reverse"] = tuple(ReversePoint(p["v"], p["a"], p.get("c"), p["kind"]) for p in raw.get("reverse", ()))
        for table in ("junction_capacitance", "conduction_loss", "active"):
            if table in raw:
                known[table] = dict(raw[table])
        sheet = Sheet(**known)
        check_points(sheet.forward, sheet.reverse, sheet.vrrm_v)
    except (KeyError, TypeError, ValueError) as bad:
        raise ValueError(f"diodes.toml, {entry}, {raw.get('manufacturer')}: {bad}") from bad
    positive = ("vrrm_v", "if_av_a", "ifsm_a", "tj_max_c", "rth_ja_c_per_w", "rth_jl_c_per_w", "rth_jc_c_per_w")
    for key in positive:
        value = getattr(sheet, key)
        if value is not None and not (math.isfinite(value) and value > 0):
            raise ValueError(f"diodes.toml, {entry}, {sheet.manufacturer}: {key} is {value}, not above 0")
    if sheet.if_av_at not in (*REFERENCES, None) or sheet.if_av_per not in ("package", "leg"):
        raise ValueError(f"diodes.toml, {entry}: if_av_at {sheet.if_av_at!r}, if_av_per {sheet.if_av_per!r}")
    return sheet


def _at_rating(sheet: Sheet, vrrm_v: float | None) -> Sheet:
    """The sheet with leakage printed "at rated voltage" moved to `vrrm_v`, the rating of this member."""
    if vrrm_v is None or sheet.vrrm_v is None or sheet.vrrm_v == vrrm_v:
        return sheet
    moved = tuple(replace(p, reverse_v=vrrm_v) if p.reverse_v == sheet.vrrm_v else p for p in sheet.reverse)
    return replace(sheet, vrrm_v=vrrm_v, reverse=moved)


def read_types(path: Path) -> tuple[DiodeType, ...]:
    """Every type in the file, families unfolded into their members. Raises ValueError naming the bad entry."""
    with path.open("rb") as file:
        raw = tomllib.load(file)
    types: list[DiodeType] = []
    for item in raw.get("diode", ()):
        entry = dict(item)
        name = entry.get("type", "?")
        members = entry.pop("members", None)
        sheets = tuple(_sheet(name, sheet) for sheet in entry.pop("sheet", ()))
        entry.setdefault("package", None)
        entry.setdefault("vrrm_v", None)
        if entry.get("technology") not in TECHNOLOGIES or not sheets:
            raise ValueError(f"diodes.toml, {name}: technology {entry.get('technology')!r}, {len(sheets)} sheets")
        try:
            base = DiodeType(**entry, sheets=sheets)
        except TypeError as bad:
            raise ValueError(f"diodes.toml, {name}: {bad}") from bad
        ratings = [(m["type"], m["vrrm_v"]) for m in members] if members else [(base.type, base.vrrm_v)]
        for member, vrrm_v in ratings:
            types.append(
                replace(
                    base,
                    type=member,
                    vrrm_v=vrrm_v,
                    sheets=tuple(_at_rating(sheet, vrrm_v) for sheet in sheets),
                    family=base.type if members else None,
                )
            )
    names = [item.type for item in types]
    twice = {name for name in names if names.count(name) > 1}
    if twice:
        raise ValueError(f"diodes.toml: {sorted(twice)} named twice")
    return tuple(types)


@functools.cache
def load_types() -> tuple[DiodeType, ...]:
    """The catalogue as printed, read once."""
    return read_types(FILE)
