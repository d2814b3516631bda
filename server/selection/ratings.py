"""Each limit, the worst case met, the margin."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from server.catalog.part import Part
from server.errors import InputError
from server.physics import thermal
from server.physics.diode import ActiveLaw, DiodeCells, forward_drop_v
from server.selection.job import Controller, Heat, Job, Rule, RuleProfile
from server.selection.result import Check, Outcome, SourceStatus

MARGINAL_FRAC = 0.10  # a margin below a tenth is worth a second look
MARGINAL_JUNCTION_C = 10.0
MARGINAL_TIPPING_C = 20.0
LEAST_SINK_C_PER_W = 0.3  # below this no passive plate is practical (engineering estimate)
SMALL_SINK_C_PER_W = 10.0  # assumed where a tab part needs less cooling than a small plate gives
TOUCH_C = 60.0
BURST_FACTOR = 1.6  # 1.6 kW/m2 at cloud edges: Yordanov, Solar Energy (2015)
ISC_MAX_FACTOR = 1.25

# NEC 2017, Table 690.7(A), crystalline silicon: lowest °C of the row, factor on Voc.
NEC_TABLE_690_7A = (
    (25, 1.00),
    (20, 1.02),
    (15, 1.04),
    (10, 1.06),
    (5, 1.08),
    (0, 1.10),
    (-5, 1.12),
    (-10, 1.14),
    (-15, 1.16),
    (-20, 1.18),
    (-25, 1.20),
    (-30, 1.21),
    (-35, 1.23),
    (-40, 1.25),
)


@dataclass(frozen=True, slots=True)
class Profile:
    """A set of margins. `voc_factor` None: only the stress that really occurs is asked of the part."""

    label: str
    voc_factor: float | None
    current_factor: float
    by_table: bool
    source_status: SourceStatus
    rule: str


PROFILES: dict[RuleProfile, Profile] = {
    "stress_only": Profile(
        "Real stress only, 1.25 × Isc",
        None,
        1.25,
        False,
        "arithmetic",
        "the reverse voltage and current that can really occur",
    ),
    "double_voc": Profile(
        "2 × cold Voc, 1.4 × Isc",
        2.0,
        1.4,
        False,
        "from memory",
        "array standards of the IEC 62548 family",
    ),
    "cold_table": Profile(
        "Cold Voc by table, 1.56 × Isc", 1.0, 1.5625, True, "read", "NEC 2017 690.7(A) and the note to 690.8"
    ),
    "double_voc_max": Profile(
        "2 × cold Voc, 1.1 × Isc,max",
        2.0,
        1.1 * ISC_MAX_FACTOR,
        False,
        "read",
        "wording as quoted from BS 7671, 712.512",
    ),
}


def table_factor(coldest_c: float) -> float:
    """Factor on Voc for the coldest ambient. Source: NEC 2017 Table 690.7(A), crystalline silicon.

    Raises:  InputError below -40 °C, where the table ends.
    """
    for lowest_c, factor in NEC_TABLE_690_7A:
        if np.floor(coldest_c) >= lowest_c:
            return factor
    raise InputError(
        "record_low_c", f"{coldest_c:g} °C is below -40 °C, where the cold-voltage table ends; use the coefficient"
    )


def self_regulated_limit_a(battery_ah: float) -> float:
    """Charge current below which a bank may go without a regulator: 3 % of its Ah, in an hour. NEC 2017 690.72."""
    return 0.03 * battery_ah


def fault_current_a(strings: int, isc_a: float) -> float:
    """Current the other strings can push into one that is shorted, Isc,max taken as 1.25 × Isc."""
    return max(strings - 1, 0) * ISC_MAX_FACTOR * isc_a


def string_protection_needed(strings: int, isc_a: float, module_fuse_a: float) -> bool:
    """Whether each string needs a fuse: more than two strings, and the rest exceed 1.35 × the module's rating.

    Source: NEN 1010:2020, 712.431.4, as a trade page explains it.
    """
    return strings > 2 and fault_current_a(strings, isc_a) > 1.35 * module_fuse_a


def current_factor(rule: Rule) -> float:
    """The factor on Isc that the part must carry for ever."""
    return rule.current_factor if rule.current_factor is not None else PROFILES[rule.profile].current_factor


def voc_factor(rule: Rule) -> float | None:
    """The factor on cold Voc that VRRM must reach; None where only real stress counts."""
    return rule.voc_factor if rule.voc_factor is not None else PROFILES[rule.profile].voc_factor


# --- heat path --------------------------------------------------------------------------------------------------------

# Class values where no sheet prints one (from memory, typical of datasheets): junction to still air, °C/W.
CLASS_RTH_JA = (("DO-41", 60.0), ("DO-15", 50.0), ("DO-201", 32.0), ("DO-204", 32.0), ("R-6", 22.0), ("P600", 20.0))
SMD_RTH_JA = 90.0
CLASS_RTH_JC = 2.0
LEADS_TO_AIR_C_PER_W = 10.0  # short leads on terminals with some copper (engineering estimate)


@dataclass(frozen=True, slots=True)
class Path:
    """Junction to the air of the box, where each part of it comes from, and what sink it still needs."""

    rth_c_per_w: float
    origin: str
    power_w: float
    sink_needed_c_per_w: float | None


def heat_path(part: Part, heat: Heat, current_a: float, box_c: float, altitude: float) -> Path:
    """The way out for the heat of `part` at a continuous `current_a`.

    The power is worked out with the maximum drop at a junction half way between box and limit, on the safe side of the
    drop at the limit itself. Where the sink is left open, the path has the largest sink that holds the limit, or a
    small plate where that is more than enough.
    """
    limit_c = junction_limit_c(part, heat)
    cells = DiodeCells.of([part.maximum])
    half_c = 0.5 * (box_c + limit_c) if limit_c > box_c else limit_c
    power = float(_drop(cells, current_a, half_c) * current_a)
    path = heat.path
    if path == "as_packaged":
        path = "free_air" if part.tab_live is None else "heatsink"
    if heat.rth_c_per_w is not None:
        return Path(heat.rth_c_per_w, "stated, junction to air", power, None)
    if path == "leads":
        if part.rth_jl_c_per_w is not None:
            total = part.rth_jl_c_per_w + LEADS_TO_AIR_C_PER_W * altitude
            return Path(
                total, f"RthJL {part.rth_jl_c_per_w:g} + {LEADS_TO_AIR_C_PER_W:g} leads to air (estimate)", power, None
            )
        ja, origin = still_air(part)
        return Path(0.6 * ja * altitude, f"0.6 × {origin} for held leads (estimate)", power, None)
    if path == "heatsink":
        jc = part.rth_jc_c_per_w
        origin = f"RthJC {jc:g}" if jc is not None else f"RthJC {CLASS_RTH_JC:g} (class value)"
        base = (CLASS_RTH_JC if jc is None else jc) + heat.interface_c_per_w
        needed = thermal.sink_needed_c_per_w(
            limit_c, box_c, power, base - heat.interface_c_per_w, heat.interface_c_per_w
        )
        if heat.sink_c_per_w is not None:
            total = base + heat.sink_c_per_w * altitude
            return Path(
                total,
                f"{origin} + {heat.interface_c_per_w:g} interface + {heat.sink_c_per_w:g} sink",
                power,
                needed / altitude,
            )
        sink = min(max(needed, LEAST_SINK_C_PER_W), SMALL_SINK_C_PER_W)
        text = f"{origin} + {heat.interface_c_per_w:g} interface + a sink of {sink:.1f}"
        return Path(base + sink, text, power, needed / altitude)
    ja, origin = still_air(part)
    return Path(ja * altitude, origin, power, None)


def still_air(part: Part) -> tuple[float, str]:
    """RthJA from the sheets, or the package's class value."""
    if part.rth_ja_c_per_w is not None:
        return part.rth_ja_c_per_w, f"RthJA {part.rth_ja_c_per_w:g}"
    for name, value in CLASS_RTH_JA:
        if part.package is not None and name in part.package:
            return value, f"RthJA {value:g} (class value for {name})"
    value = SMD_RTH_JA if part.tab_live is None else 60.0
    return value, f"RthJA {value:g} (class value)"


def junction_limit_c(part: Part, heat: Heat) -> float:
    """The junction limit with reverse voltage applied, or the job's lower one."""
    return part.tj_max_c if heat.junction_limit_c is None else min(part.tj_max_c, heat.junction_limit_c)


def _drop(cells: DiodeCells, current_a: float, junction_c: float) -> float:
    return float(forward_drop_v(cells, np.array([current_a]), np.array([junction_c]))[0])


# --- the checks -------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Worst:
    """The worst case of the site, the same for every candidate."""

    stress_v: float
    cold_voc_v: float
    hot_reverse_v: float
    isc_a: float
    """All that one diode carries at STC."""
    box_c: float
    hot_vmp_v: float
    full_v: float
    loop_ohm: float
    altitude: float
    strings_per_diode: int


def upper(
    code: str,
    title: str,
    met: float,
    allowed: float,
    unit: str,
    rule: str,
    status: SourceStatus,
    sentence: str,
    *,
    least_margin_frac: float = MARGINAL_FRAC,
) -> Check:
    """A check that `met` stays at or under `allowed`; marginal where less than `least_margin_frac` is left.

    A rule that carries a factor of its own needs no second margin on top: it passes or fails.
    """
    margin = (allowed - met) / allowed if allowed > 0 else -1.0
    outcome: Outcome = "fail" if met > allowed else "marginal" if margin < least_margin_frac else "pass"
    return Check(code, title, met, allowed, unit, margin, outcome, rule, status, sentence)


@dataclass(frozen=True, slots=True)
class HotPart:
    """One part at the worst hour: warmed by its forward current, then suddenly reversed. NaN as in ReverseBalance."""

    legs: int
    current_a: float
    junction_c: float
    drop_v: float
    reverse_v: float
    stable_typ_c: float
    stable_max_c: float
    tipping_typ_c: float
    tipping_max_c: float


def hot_parts(job: Job, worst: Worst, paths: Sequence[Path]) -> list[HotPart]:
    """The worst hour for all parts at once: forward heat with the maximum drop, then both corners in reverse."""
    parts = job.parts
    if not parts:
        return []
    legs = [part.dies if job.legs == "both" else 1 for part in parts]
    typical = DiodeCells.of([part.typical for part in parts], legs)
    maximum = DiodeCells.of([part.maximum for part in parts], legs)
    rth = np.array([path.rth_c_per_w for path in paths])
    heat_a = job.heat.current_factor * worst.isc_a
    junction, drop = thermal.forward_heat(maximum, np.full(len(parts), heat_a), np.full(len(parts), worst.box_c), rth)
    volts = np.minimum(worst.hot_reverse_v, np.array([part.vrrm_v for part in parts]))
    at_typ = thermal.reverse_balance(typical, volts, worst.box_c, rth)
    at_max = thermal.reverse_balance(maximum, volts, worst.box_c, rth)
    columns = (junction, drop, volts, at_typ.stable_c, at_max.stable_c, at_typ.tipping_c, at_max.tipping_c)
    rows = zip(legs, *(column.tolist() for column in columns), strict=True)
    return [HotPart(n, heat_a, *row) for n, *row in rows]


def part_checks(part: Part, job: Job, worst: Worst, path: Path, hot: HotPart) -> tuple[Check, ...]:
    """All limits of one part. Failures are results, not errors."""
    checks = [
        upper(
            "reverse_stress",
            "Reverse voltage that can occur",
            worst.stress_v,
            part.vrrm_v,
            "V",
            "VRRM at or above the real stress",
            "arithmetic",
            f"{worst.stress_v:.1f} V may stand across it in reverse; it is rated {part.vrrm_v:g} V",
        )
    ]
    factor = voc_factor(job.rule)
    profile = PROFILES[job.rule.profile]
    if factor is not None:
        asked = factor * worst.cold_voc_v
        checks.append(
            upper(
                "rule_voltage",
                "Reverse voltage asked by the rule",
                asked,
                part.vrrm_v,
                "V",
                f"VRRM at or above {factor:g} × cold Voc ({profile.rule})",
                profile.source_status,
                f"{factor:g} × {worst.cold_voc_v:.1f} V asks for {asked:.1f} V; it is rated {part.vrrm_v:g} V",
                least_margin_frac=0.0,
            )
        )
    junction, power = hot.junction_c, hot.drop_v * hot.current_a
    checks.append(_junction_check(part, job, worst, path, junction, hot.current_a))
    checks.append(_current_check(part, job, worst, junction, power, hot.legs))
    checks.append(_stability_check(hot))
    if part.ifsm_a is not None:
        burst = BURST_FACTOR * worst.isc_a
        checks.append(
            upper(
                "surge",
                "Current burst at a cloud's edge",
                burst,
                part.ifsm_a,
                "A",
                f"IFSM at or above {BURST_FACTOR:g} × Isc",
                "read",
                f"bursts of {BURST_FACTOR:g} kW/m² give {burst:.1f} A; one pulse of {part.ifsm_a:g} A is allowed",
            )
        )
    if job.charge.controller != "mppt":
        checks.append(headroom_check(worst, hot.drop_v, hot.current_a))
    if part.tab_live is not None:
        live = part.tab_live
        text = (
            f"the tab is the cathode: it, and a sink screwed to it, stand at {live_at(job)}"
            if live
            else "the mounting base is isolated; check the isolation rating before energising"
        )
        checks.append(
            Check("live_tab", "Live tab", None, None, "", None, "info", "package practice", "from memory", text)
        )
    case_c = junction - power * (part.rth_jc_c_per_w or part.rth_jl_c_per_w or 0.0)
    if case_c > TOUCH_C:
        text = f"the case may reach {case_c:.0f} °C: guard it, and mount it on nothing that burns"
        checks.append(
            Check("touch", "Touch temperature", case_c, TOUCH_C, "°C", None, "info", "60 °C case", "from memory", text)
        )
    return tuple(checks)


def _junction_check(part: Part, job: Job, worst: Worst, path: Path, junction: float, heat_a: float) -> Check:
    limit = junction_limit_c(part, job.heat)
    rule = f"{job.heat.current_factor:g} × Isc in the hottest box air, no wind"
    needed = path.sink_needed_c_per_w
    margin = (limit - junction) / limit
    if needed is not None and job.heat.sink_c_per_w is None:
        outcome: Outcome = "pass" if needed >= 1.0 else "marginal" if needed >= LEAST_SINK_C_PER_W else "fail"
        text = (
            f"on a heatsink of at most {min(needed, 99):.1f} °C/W in air of {worst.box_c:.0f} °C it stays within "
            f"{limit:g} °C "
            f"at {heat_a:.1f} A ({path.power_w:.1f} W)"
            if outcome != "fail"
            else f"no practical heatsink holds {limit:g} °C: {path.power_w:.1f} W in air of {worst.box_c:.0f} °C "
            "would need "
            f"{needed:.1f} °C/W"
        )
        return Check(
            "junction", "Junction temperature", junction, limit, "°C", margin, outcome, rule, "arithmetic", text
        )
    at = "past 300 °C" if junction > 300 else f"{junction:.0f} °C"
    outcome = "fail" if junction > limit else "marginal" if limit - junction < MARGINAL_JUNCTION_C else "pass"
    text = (
        f"{path.rth_c_per_w:.1f} °C/W ({path.origin}) and air of {worst.box_c:.0f} °C bring it to {at} at "
        f"{heat_a:.1f} A; {limit:g} °C is allowed"
    )
    return Check("junction", "Junction temperature", junction, limit, "°C", margin, outcome, rule, "arithmetic", text)


def derated_current_a(if_av_a: float, at_c: float, junction_limit_c: float, here_c: float) -> float:
    """IF(AV) at `here_c`, falling in a straight line from its reference temperature to 0 at the junction limit."""
    if junction_limit_c <= at_c:
        return if_av_a if here_c <= at_c else 0.0
    return if_av_a * float(np.clip((junction_limit_c - here_c) / (junction_limit_c - at_c), 0.0, 1.0))


def _current_check(part: Part, job: Job, worst: Worst, junction: float, power: float, legs: int) -> Check:
    factor = current_factor(job.rule)
    met = factor * worst.isc_a
    profile = PROFILES[job.rule.profile]
    title, rule = "Continuous current", f"IF(AV) at or above {factor:g} × Isc ({profile.rule})"
    if part.if_av_a is None:
        text = f"{met:.1f} A must be carried for ever; no rating is printed, so this is not judged"
        return Check("current", title, met, None, "A", None, "info", rule, profile.source_status, text)
    rated = part.if_av_a
    if part.dies > 1:
        per_leg = rated if part.if_av_per == "leg" else rated / part.dies
        rated = per_leg * legs
    allowed, where = rated, "no reference temperature is printed"
    if part.if_av_at is not None and part.if_av_at_c is not None:
        inner = {"ambient": None, "lead": part.rth_jl_c_per_w, "case": part.rth_jc_c_per_w}[part.if_av_at]
        here = worst.box_c if part.if_av_at == "ambient" else max(junction - power * (inner or 0.0), worst.box_c)
        top = max(part.tj_max_c, part.tj_max_forward_only_c or 0.0)
        allowed = derated_current_a(rated, part.if_av_at_c, top, here)
        where = f"rated {rated:g} A at {part.if_av_at_c:g} °C {part.if_av_at}, here about {here:.0f} °C"
    text = f"{met:.1f} A must be carried for ever; {allowed:.1f} A is allowed ({where})"
    if allowed <= 0:
        return Check("current", title, met, allowed, "A", -1.0, "fail", rule, profile.source_status, text)
    status = profile.source_status
    return upper("current", title, met, allowed, "A", rule, status, text, least_margin_frac=0.0)


def _stability_check(hot: HotPart) -> Check:
    title = "Stability in reverse, hot"
    rule = "leakage's heat must grow slower than it flows off: dP/dTj < 1/Rth (AN869), at the moment of reversal"
    junction, volts = hot.junction_c, hot.reverse_v

    def holds(stable_c: float, tipping_c: float) -> bool:
        return not math.isnan(stable_c) and (math.isnan(tipping_c) or junction < tipping_c)

    ok_max, ok_typ = holds(hot.stable_max_c, hot.tipping_max_c), holds(hot.stable_typ_c, hot.tipping_typ_c)
    met = junction
    tip_max = -math.inf if math.isnan(hot.stable_max_c) else hot.tipping_max_c
    if ok_max:
        near = not math.isnan(tip_max) and tip_max - junction < MARGINAL_TIPPING_C
        text = (
            f"reversed at {volts:.1f} V with the junction at {junction:.0f} °C it cools"
            + ("" if math.isnan(tip_max) else f"; above {tip_max:.0f} °C it would run away")
            + ", even at maximum leakage"
        )
        outcome: Outcome = "marginal" if near else "pass"
    elif ok_typ:
        outcome = "marginal"
        text = f"a typical part cools after reversal at {volts:.1f} V, but one at its maximum leakage runs away " + (
            "from any temperature: no stable point" if math.isinf(tip_max) else f"above {tip_max:.0f} °C"
        )
    else:
        outcome = "fail"
        text = (
            f"reversed at {volts:.1f} V with the junction at {junction:.0f} °C it runs away: no stable point is reached"
        )
    allowed = None if not math.isfinite(tip_max) else tip_max
    margin = None if allowed is None else (allowed - met) / allowed
    return Check("stability", title, met, allowed, "°C", margin, outcome, rule, "read", text)


def headroom_check(worst: Worst, drop_v: float, current_a: float) -> Check:
    """Whether the hot string still reaches absorption behind diode and cable. Low headroom costs charge, not safety."""
    left = worst.hot_vmp_v - drop_v - worst.loop_ohm * current_a
    margin = (left - worst.full_v) / worst.full_v
    short = left < worst.full_v
    text = (
        f"hot Vmp {worst.hot_vmp_v:.1f} V less drop and cable leaves {left:.1f} V for an absorption of "
        f"{worst.full_v:.1f} V" + (": charge is cut at the end of hot days" if short else "")
    )
    return Check(
        "headroom",
        "Headroom, hot",
        left,
        worst.full_v,
        "V",
        margin,
        "info",
        "hot Vmp − drops ≥ absorption",
        "arithmetic",
        text,
    )


def none_checks(job: Job, worst: Worst) -> tuple[Check, ...]:
    """What speaks against leaving the diode out."""
    checks = []
    controller: Controller = job.charge.controller
    if controller == "shunt":
        text = "the regulator shorts the panel when the bank is full: without a series diode it would short the bank"
        checks.append(
            Check(
                "shunt_needs_diode",
                "Shunt regulator",
                None,
                None,
                "",
                None,
                "fail",
                "common practice",
                "common practice",
                text,
            )
        )
    if controller != "mppt":
        checks.append(headroom_check(worst, 0.0, job.heat.current_factor * worst.isc_a))
    return tuple(checks)


def site_checks(job: Job) -> tuple[Check, ...]:
    """What holds for the site whichever part is fitted."""
    checks = []
    isc, strings = job.array.label.isc_a, job.array.strings
    fuse = job.array.max_series_fuse_a
    met = fault_current_a(strings, isc)
    title, rule = (
        "String fuses",
        "more than two strings, and (N − 1) × 1.25 × Isc above 1.35 × the module's maximum fuse",
    )
    if strings <= 2:
        text = (
            "one string has no neighbour to feed a fault from the array side"
            if strings == 1
            else f"two strings: one can push at most {met:.1f} A into the other, no string fuse is needed for that"
        )
        checks.append(Check("string_fuse", title, met, None, "A", None, "pass", rule, "read", text))
    elif fuse is None:
        text = (
            f"{strings - 1} strings can push {met:.1f} A into a faulty one: fuse every string unless 1.35 × the "
            "maximum series "
            "fuse on the label, which is not given, is more than that; the diode is not overcurrent protection"
        )
        checks.append(Check("string_fuse", title, met, None, "A", None, "marginal", rule, "read", text))
    else:
        needed = string_protection_needed(strings, isc, fuse)
        text = f"{strings - 1} strings can push {met:.1f} A into a faulty one, against 1.35 × {fuse:g} A: " + (
            "fuse every string; the diode is not overcurrent protection"
            if needed
            else "no string fuse is needed for that"
        )
        allowed = 1.35 * fuse
        margin = (allowed - met) / allowed
        checks.append(
            Check("string_fuse", title, met, allowed, "A", margin, "marginal" if needed else "pass", rule, "read", text)
        )
    if job.charge.controller == "direct":
        checks.append(_self_regulated(job, ISC_MAX_FACTOR * isc * strings))
    return tuple(checks)


def _self_regulated(job: Job, met: float) -> Check:
    title, rule = (
        "Charging without a regulator",
        "largest charge current in one hour below 3 % of the Ah (NEC 2017 690.72)",
    )
    if job.bank.capacity_ah is None:
        text = f"up to {met:.1f} A may flow unregulated; the bank's Ah is not given, so this is not judged"
        return Check("self_regulated", title, met, None, "A", None, "info", rule, "read", text)
    allowed = self_regulated_limit_a(job.bank.capacity_ah)
    outcome: Outcome = "pass" if met < allowed else "fail"
    text = f"up to {met:.1f} A may flow; {allowed:.2f} A is 3 % of {job.bank.capacity_ah:g} Ah" + (
        "" if outcome == "pass" else ": the bank will be overcharged unless a regulator is fitted"
    )
    return Check("self_regulated", title, met, allowed, "A", (allowed - met) / allowed, outcome, rule, "read", text)


def live_at(job: Job) -> str:
    """What a live tab (the cathode) is connected to, by the side of the circuit the diode sits in."""
    if job.earthing == "positive":
        return "the string's negative end, the live side of a positive-earth system"
    return "battery positive"


def is_active(part: Part) -> bool:
    """An active rectifier."""
    return isinstance(part.typical, ActiveLaw)
