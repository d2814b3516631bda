"""Types as printed -> parts that can be chosen: sheets merged on the safe side, fitted, and looked up by name."""

import difflib
import functools
from collections.abc import Mapping, Sequence

import numpy as np

from server.catalog.active import active_parts
from server.catalog.datasheet import DiodeType, ForwardPoint, ReversePoint, Sheet, check_points, load_types
from server.catalog.fit import Fit, check_overrides, finished
from server.catalog.forward import ForwardFit
from server.catalog.halves import Halves, Remark, fit_halves
from server.catalog.part import Part, Unfitted, tab_live
from server.catalog.reverse import ReverseFit, heat_exponent
from server.errors import InputError

SHEETS_AGREE_WITHIN = 2.0  # leakage at one condition
END_C = (25.0, 150.0)  # where sheets are compared: ln(leakage) is a straight line between, and goes on as one
VF_AT_C = np.array([25.0, 60.0])
# The lowest junction limit that any sheet of this catalogue prints.
LOWEST_TJ_MAX_C = 125.0


def leg_current_a(sheet: Sheet, dies: int) -> float | None:
    """Printed average current of one leg. A package of several dies is counted as two legs (a bridge too)."""
    if sheet.if_av_a is None:
        return None
    return sheet.if_av_a if sheet.if_av_per == "leg" else sheet.if_av_a / min(dies, 2)


def _merged_reverse(fits: Sequence[ReverseFit], vrrm_v: float, *, worst: bool) -> ReverseFit:
    """The worst, or the median, of several sheets' leakage: taken at 25 and at 150 °C, at `vrrm_v`.

    Each sheet's ln(leakage) is a straight line on the axis of `heat_exponent`, so the line through the two worst ends
    lies on or above every sheet between them; the line through the two medians is a part of the middle, cold and hot.
    """
    if len(fits) == 1:
        return fits[0]
    x = heat_exponent(np.array(END_C))
    lines = np.array(
        [np.log(f.leakage_a) + f.leakage_exponent * np.log(vrrm_v / f.leakage_ref_v) + f.leakage_ev * x for f in fits]
    )
    exponents = [f.leakage_exponent for f in fits]
    cold, hot = (np.max if worst else np.median)(lines, axis=0)
    energy_ev = max(float((hot - cold) / (x[1] - x[0])), 0.0)
    exponent = float(min(exponents) if worst else np.median(exponents))
    return ReverseFit(float(np.exp(cold)), vrrm_v, exponent, energy_ev)


def _ranked_forward(fits: Sequence[ForwardFit], rated_a: float) -> list[ForwardFit]:
    """Sheets from the lowest to the highest drop at rated current, mean of 25 and 60 °C."""
    return sorted(fits, key=lambda f: float(np.mean(f.drop_v(rated_a, VF_AT_C))))


def _merged_halves(halves: Sequence[Halves], sheets: Sequence[Sheet], vrrm_v: float, rated_a: float) -> Halves:
    """One set of half-laws for several sheets: typical from the middle, maximum from the worst."""
    assumed: list[str] = []
    warnings: list[Remark] = []
    for one in halves:
        assumed += [words for words in one.assumed if words not in assumed]
        warnings += [remark for remark in one.warnings if remark not in warnings]
    typ_f = _ranked_forward([h.forward_typ for h in halves if h.forward_typ], rated_a)
    max_f = _ranked_forward([h.forward_max for h in halves if h.forward_max], rated_a)
    typ_r = [h.reverse_typ for h in halves if h.reverse_typ]
    max_r = [h.reverse_max for h in halves if h.reverse_max]
    if len(halves) > 1:
        assumed.append(
            f"{len(halves)} sheets: typical leakage is their median at 25 and at 150 °C and the maximum their highest "
            f"there, VR at its rating; typical drop is that of the middle sheet at {rated_a:g} A and the maximum that "
            "of the highest"
        )
        warnings += _disagreements(sheets)
    return Halves(
        typ_f[len(typ_f) // 2] if typ_f else None,  # of an even number, the upper of the middle two
        max_f[-1] if max_f else None,
        _merged_reverse(typ_r, vrrm_v, worst=False) if typ_r else None,
        _merged_reverse(max_r, vrrm_v, worst=True) if max_r else None,
        tuple(assumed),
        tuple(warnings),
        any(h.typical_leakage_printed for h in halves),
    )


def _disagreements(sheets: Sequence[Sheet]) -> list[Remark]:
    """Leakage printed at one condition by two sheets that differ by more than a factor of two."""
    seen: dict[tuple[float, float | None, str], list[tuple[float, str]]] = {}
    for sheet in sheets:
        for p in sheet.reverse:
            seen.setdefault((p.reverse_v, p.junction_c, p.kind), []).append((p.current_a, sheet.manufacturer))
    remarks = []
    for (volt, junction_c, kind), found in seen.items():
        low, high = min(found), max(found)
        if high[0] > SHEETS_AGREE_WITHIN * low[0] and junction_c is not None:
            remarks.append(
                Remark(
                    "sheets_disagree",
                    f"{kind} leakage at {volt:g} V, {junction_c:g} °C: {low[0] * 1e3:g} mA ({low[1]}) "
                    f"against {high[0] * 1e3:g} mA ({high[1]})",
                )
            )
    return remarks


def _points(sheets: Sequence[Sheet]) -> tuple[list[ForwardPoint], list[ReversePoint]]:
    return [p for s in sheets for p in s.forward], [p for s in sheets for p in s.reverse]


def missing(item: DiodeType) -> str | None:
    """Why a junction type cannot be fitted, or None."""
    forward, reverse = _points(item.sheets)
    if item.vrrm_v is None:
        return "no reverse voltage rating is printed"
    lacking = []
    for name, points in (("forward point", forward), ("leakage point", reverse)):
        if not points:
            lacking.append(f"no {name} is printed on the parts that could be read")
        elif all(p.junction_c is None for p in points):
            lacking.append(f"no {name} has a junction temperature on the parts that could be read")
    return "; ".join(lacking) or None


def _sister(item: DiodeType) -> ForwardFit | None:
    """The maximum forward law of the sheet that says most, to guide the others; None for a single sheet."""
    if len(item.sheets) == 1:
        return None

    def says(sheet: Sheet) -> tuple[int, int]:
        return len({p.junction_c for p in sheet.forward}), len(sheet.forward)

    best = max(item.sheets, key=says)
    return fit_halves(item.technology, best.forward, ()).forward_max if says(best) > (1, 1) else None


def _fit(item: DiodeType, vrrm_v: float, rated_a: float, overrides: Mapping[str, float | None]) -> Fit:
    sister = _sister(item)
    each = [
        fit_halves(item.technology, sheet.forward, sheet.reverse, sister=sister, **overrides) for sheet in item.sheets
    ]
    told = [h for h in each if h.forward_typ or h.reverse_typ]
    return finished(_merged_halves(told, item.sheets, vrrm_v, rated_a), *_points(item.sheets), vrrm_v)


def fit_type(
    item: DiodeType,
    *,
    ideality: float | None = None,
    forward_slope_v_per_k: float | None = None,
    leakage_exponent: float | None = None,
) -> Part:
    """A junction type as a part: every sheet fitted, ratings the most cautious of all sheets.

    A user's own sheet takes this door too: the points pass the same gate, and the three values replace the class's.

    Average current: the sheet with the lowest per leg, then the lowest reference temperature. Junction limit and surge:
    the lowest. Thermal resistances: the highest, each kind by itself.

    Raises:  InputError where no law can be fitted; `unfitted()` gives the reasons.
    """
    reason = missing(item)
    if reason is not None or item.vrrm_v is None:
        raise InputError("candidates", f"{item.type} cannot be computed with: {reason}")
    check_overrides(item.vrrm_v, ideality, forward_slope_v_per_k, leakage_exponent)
    for sheet in item.sheets:
        check_points(sheet.forward, sheet.reverse, item.vrrm_v)
    rated = [
        (leg_a, sheet.if_av_at_c if sheet.if_av_at_c is not None else 1e3, index)
        for index, sheet in enumerate(item.sheets)
        if (leg_a := leg_current_a(sheet, item.dies)) is not None
    ]
    lowest = item.sheets[min(rated)[2]] if rated else None
    rated_a = min(rated)[0] if rated else min(p.current_a for p in _points(item.sheets)[0])
    overrides = {
        "ideality": ideality,
        "forward_slope_v_per_k": forward_slope_v_per_k,
        "leakage_exponent": leakage_exponent,
    }
    fit = _fit(item, item.vrrm_v, rated_a, overrides)
    assumed = list(fit.assumed)
    limits = [sheet.tj_max_c for sheet in item.sheets if sheet.tj_max_c is not None]
    if not limits:
        assumed.append(
            f"no junction limit is printed: {LOWEST_TJ_MAX_C:g} °C, the lowest that any sheet of this catalogue prints"
        )

    def worst(name: str) -> float | None:
        return max((value for sheet in item.sheets if (value := getattr(sheet, name)) is not None), default=None)

    return Part(
        type=item.type,
        technology=item.technology,
        package=item.package,
        dies=item.dies,
        vrrm_v=item.vrrm_v,
        if_av_a=lowest.if_av_a if lowest else None,
        if_av_at=lowest.if_av_at if lowest else None,
        if_av_at_c=lowest.if_av_at_c if lowest else None,
        if_av_per=lowest.if_av_per if lowest else "package",
        ifsm_a=min((s.ifsm_a for s in item.sheets if s.ifsm_a is not None), default=None),
        tj_max_c=min(limits, default=LOWEST_TJ_MAX_C),
        tj_max_forward_only_c=min(
            (s.tj_max_forward_only_c for s in item.sheets if s.tj_max_forward_only_c is not None), default=None
        ),
        rth_ja_c_per_w=worst("rth_ja_c_per_w"),
        rth_jl_c_per_w=worst("rth_jl_c_per_w"),
        rth_jc_c_per_w=worst("rth_jc_c_per_w"),
        tab_live=tab_live(item.package),
        sheets=item.sheets,
        fit=fit,
        typical=fit.typical,
        maximum=fit.maximum,
        assumed=tuple(assumed),
        warnings=fit.warnings,
        note=item.note,
        family=item.family,
    )


@functools.cache
def load_parts() -> tuple[Part, ...]:
    """Every part that can be computed with: junction types in the file's order, then active rectifiers."""
    junctions = tuple(fit_type(item) for item in load_types() if item.technology != "active" and missing(item) is None)
    return junctions + active_parts(load_types())[0]


@functools.cache
def unfitted() -> tuple[Unfitted, ...]:
    """Every type of the catalogue that is not a part, with the reason: nothing is dropped in silence."""
    reasons = [
        Unfitted(item.type, item.technology, reason)
        for item in load_types()
        if item.technology != "active" and (reason := missing(item)) is not None
    ]
    return tuple(reasons) + active_parts(load_types())[1]


@functools.cache
def _by_name() -> dict[str, Part]:
    return {name: item for item in load_parts() for name in (item.key, item.type.casefold())}


def part(type_name: str) -> Part:
    """The part of that name (type or key, in any case). Raises InputError, offering names that come close."""
    names = _by_name()
    wanted = type_name.strip().casefold()
    if wanted in names:
        return names[wanted]
    for item in unfitted():
        if item.type.casefold() == wanted:
            raise InputError("candidates", f"{item.type} cannot be computed with: {item.reason}")
    close = difflib.get_close_matches(wanted, [item.type.casefold() for item in load_parts()], n=3, cutoff=0.6)
    offer = f"; close to it: {', '.join(names[name].type for name in close)}" if close else ""
    raise InputError("candidates", f"{type_name[:60]!r} is not in the catalogue{offer}")
