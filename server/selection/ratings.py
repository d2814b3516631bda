"""Each limit, the worst case met, the margin."""

import math
from dataclasses import dataclass, replace

from server.catalog.part import Part
from server.errors import InputError
from server.physics.diode import ActiveLaw
from server.selection.figures import figure
from server.selection.heating import (
    LEAST_SINK_C_PER_W,
    MARGINAL_TIPPING_C,
    HotPart,
    Worst,
    allowed_current_a,
    junction_limit_c,
    rated_current_a,
    reference_c,
)
from server.selection.job import Controller, Job, Rule, RuleProfile
from server.selection.result import Check, Outcome, SourceStatus

MARGINAL_FRAC = 0.10  # a margin below a tenth is worth a second look
MARGINAL_JUNCTION_C = 10.0
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
        if math.floor(coldest_c) >= lowest_c:
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


# --- the checks -------------------------------------------------------------------------------------------------------


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


def part_checks(part: Part, job: Job, worst: Worst, hot: HotPart) -> tuple[Check, ...]:
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
    checks.append(_junction_check(part, job, worst, hot))
    checks.append(_current_check(part, job, worst, hot))
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
                f"bursts of {BURST_FACTOR:g} kW/m² give {burst:.1f} A for seconds; one half-sine of {part.ifsm_a:g} A, "
                "some 8 ms long, is the least that must stand above it",
            )
        )
    checks.append(headroom_check(job, worst, hot.usual_drop_v))
    if part.dies > 1:
        text = (
            "both dies are used: they share one temperature and so the current, and their leakage adds"
            if job.legs == "both"
            else "one die is counted; two packages side by side would not share, for the warmer one takes more"
        )
        checks.append(
            Check(
                "sharing", "Sharing the current", None, None, "", None, "info", "negative VF slope", "arithmetic", text
            )
        )
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


def _junction_check(part: Part, job: Job, worst: Worst, hot: HotPart) -> Check:
    path, junction, limit = hot.path, hot.junction_c, junction_limit_c(part, job.heat)
    rule = f"{job.heat.current_factor:g} × Isc in the hottest box air, no wind"
    needed = path.sink_needed_c_per_w
    margin = (limit - junction) / limit
    title, at = "Junction temperature", "past 300 °C" if junction > 300 else f"{junction:.0f} °C"
    if path.sink_open and needed is not None:
        outcome: Outcome = "pass" if needed >= 1.0 else "marginal" if needed >= LEAST_SINK_C_PER_W else "fail"
        if junction > limit:
            outcome = "fail"
        if outcome == "fail":
            text = (
                f"no practical heatsink holds {limit:g} °C: {path.power_w:.1f} W in air of {worst.box_c:.0f} °C would "
                f"need {needed:.1f} °C/W"
            )
        else:
            text = (
                f"on a heatsink of at most {needed:.1f} °C/W in air of {worst.box_c:.0f} °C its limits hold at "
                f"{hot.current_a:.1f} A ({path.power_w:.1f} W); as computed here ({path.origin}) it reaches {at}"
            )
        return Check("junction", title, junction, limit, "°C", margin, outcome, rule, "arithmetic", text)
    outcome = "fail" if junction > limit else "marginal" if limit - junction < MARGINAL_JUNCTION_C else "pass"
    text = (
        f"{path.rth_c_per_w:.1f} °C/W ({path.origin}) and air of {worst.box_c:.0f} °C bring it to {at} at "
        f"{hot.current_a:.1f} A; {limit:g} °C is allowed"
    )
    return Check("junction", title, junction, limit, "°C", margin, outcome, rule, "arithmetic", text)


def _current_check(part: Part, job: Job, worst: Worst, hot: HotPart) -> Check:
    factor = current_factor(job.rule)
    met = factor * worst.isc_a
    profile = PROFILES[job.rule.profile]
    title, rule = "Continuous current", f"IF(AV) at or above {factor:g} × Isc ({profile.rule})"
    air_c = worst.box_c + hot.path.box_c_per_w * hot.rule_power_w
    rated = rated_current_a(part, hot.legs)
    allowed = allowed_current_a(part, hot.legs, air_c, hot.rule_junction_c, hot.rule_power_w)
    if rated is None or allowed is None:
        text = f"{met:.1f} A must be carried for ever; no rating is printed, so this is not judged"
        return Check("current", title, met, None, "A", None, "info", rule, profile.source_status, text)
    where = "no reference temperature is printed"
    if part.if_av_at is not None and part.if_av_at_c is not None:
        here = reference_c(part, air_c, hot.rule_junction_c, hot.rule_power_w)
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


def headroom_check(job: Job, worst: Worst, drop_v: float) -> Check:
    """Whether the hot string still charges behind diode and cable, at Imp. It costs charge, not safety."""
    amps = job.array.label.imp_a * worst.strings_per_diode
    left = worst.hot_vmp_v - drop_v - worst.loop_ohm * amps
    margin = (left - worst.full_v) / worst.full_v
    text = (
        f"hot Vmp {worst.hot_vmp_v:.1f} V less drop and cable leaves {left:.1f} V for an absorption of "
        f"{worst.full_v:.1f} V"
    )
    if left < worst.full_v:
        text += (
            ": a converter that only steps down cannot charge on hot days"
            if job.charge.controller == "mppt"
            else ": charge is cut at the end of hot days"
        )
    title, rule = "Headroom, hot", "hot Vmp − drops ≥ absorption"
    return Check("headroom", title, left, worst.full_v, "V", margin, "info", rule, "arithmetic", text)


def bare_night_check(night_a: float, job: Job) -> Check:
    """Whether the bare string may take what the bank would push into it by night, its dark current at the high end."""
    limit = job.array.max_series_fuse_a
    allowed = job.array.label.isc_a if limit is None else limit
    rule = "current back into a string at or under the module's maximum series fuse (Isc where it is not given)"
    text = f"by night the bank may push {figure(night_a)} A into each bare string; {allowed:g} A is allowed"
    title = "Current back into the bare string"
    return upper("bare_night", title, night_a, allowed, "A", rule, "arithmetic", text)


def none_checks(job: Job, worst: Worst, night_a: float) -> tuple[Check, ...]:
    """What speaks against leaving the diode out. night_a: the most one bare string takes in the dark, a magnitude."""
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
    checks.append(headroom_check(job, worst, 0.0))
    if controller_lets_back(job):
        checks.append(bare_night_check(night_a, job))
    return tuple(checks)


def controller_lets_back(job: Job) -> bool:
    """Whether current may flow back through the controller by night, as far as is known."""
    return job.charge.blocks_at_night != "yes"


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
            "maximum series fuse on the label, which is not given, is more than that; the diode is not overcurrent "
            "protection"
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
        outcome: Outcome = "fail" if needed else "pass"
        checks.append(Check("string_fuse", title, met, allowed, "A", margin, outcome, rule, "read", text))
    if controller_lets_back(job):
        last = checks[-1]
        bank = "; the bank can feed a fault too, so the fuse towards it must not exceed the module's maximum"
        checks[-1] = replace(last, sentence=last.sentence + bank)
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
