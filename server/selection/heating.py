"""Where a part's heat goes, how hot its junction gets at the worst hour, and the heatsink that keeps it in limits."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from server.catalog.part import Part
from server.physics import thermal
from server.physics.diode import DiodeCells, FloatArray, forward_drop_v, reverse_a
from server.selection.figures import figure
from server.selection.job import Heat, Job
from server.selection.result import ReverseHeat

LEAST_SINK_C_PER_W = 0.3  # below this no passive plate is practical (engineering estimate)
SMALL_SINK_C_PER_W = 10.0  # assumed where a tab part needs less cooling than a small plate gives
LARGEST_SINK_C_PER_W = 60.0  # a bare tab in still air, common practice: above it no sink is needed at all
MARGINAL_TIPPING_C = 20.0

# Class values where no sheet prints one (from memory, typical of datasheets): junction to still air, °C/W.
CLASS_RTH_JA = (("DO-41", 60.0), ("DO-15", 50.0), ("DO-201", 32.0), ("DO-204", 32.0), ("R-6", 22.0), ("P600", 20.0))
SMD_RTH_JA = 90.0
CLASS_RTH_JC = 2.0
LEADS_TO_AIR_C_PER_W = 10.0  # short leads on terminals with some copper (engineering estimate)


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


@dataclass(frozen=True, slots=True)
class Path:
    """Junction to the air of the box, where each part of it comes from, and what sink it still needs.

    Sinks are given as they are near sea level; `rth_c_per_w` holds the altitude and all that is shared.
    """

    rth_c_per_w: float
    origin: str
    power_w: float
    sink_needed_c_per_w: float | None
    """None where there is no sink in the path; below zero where none can help."""
    sink_open: bool = False
    """The job leaves the sink open: it is chosen here."""
    box_c_per_w: float = 0.0
    """The part of `rth_c_per_w` that warms the whole box."""


@dataclass(frozen=True, slots=True)
class HotPart:
    """One part at the worst hour: warmed by its forward current, then suddenly reversed. NaN as in ReverseBalance."""

    path: Path
    legs: int
    current_a: float
    junction_c: float
    drop_v: float
    rule_junction_c: float
    """At the rule's current, which the continuous rating is held against."""
    rule_power_w: float
    usual_drop_v: float
    """At Imp, which headroom is held against."""
    reverse_v: float
    stable_typ_c: float
    stable_max_c: float
    tipping_typ_c: float
    tipping_max_c: float
    critical_typ_c: float
    critical_max_c: float
    allowable_c: float

    def in_reverse(self) -> ReverseHeat:
        """The part of it that the answer shows."""

        def known(value: float) -> float | None:
            return None if math.isnan(value) else value

        return ReverseHeat(
            self.reverse_v,
            known(self.stable_typ_c),
            known(self.stable_max_c),
            known(self.tipping_typ_c),
            known(self.tipping_max_c),
            known(self.critical_typ_c),
            known(self.critical_max_c),
            self.allowable_c,
        )


def legs_of(part: Part, job: Job) -> int:
    """How many dies of the package carry the current."""
    return part.parallel_legs if job.legs == "both" else 1


def junction_limit_c(part: Part, heat: Heat) -> float:
    """The junction limit with reverse voltage applied, or the job's lower one."""
    return part.tj_max_c if heat.junction_limit_c is None else min(part.tj_max_c, heat.junction_limit_c)


def still_air(part: Part) -> tuple[float, str]:
    """RthJA from the sheets, or the package's class value."""
    if part.rth_ja_c_per_w is not None:
        return part.rth_ja_c_per_w, f"RthJA {part.rth_ja_c_per_w:g}"
    for name, value in CLASS_RTH_JA:
        if part.package is not None and name in part.package:
            return value, f"RthJA {value:g} (class value for {name})"
    value = SMD_RTH_JA if part.tab_live is None else 60.0
    return value, f"RthJA {value:g} (class value)"


def derated_current_a(if_av_a: float, at_c: float, junction_limit_c: float, here_c: float) -> float:
    """IF(AV) at `here_c`, falling in a straight line from its reference temperature to 0 at the junction limit."""
    if junction_limit_c <= at_c:
        return if_av_a if here_c <= at_c else 0.0
    return if_av_a * float(np.clip((junction_limit_c - here_c) / (junction_limit_c - at_c), 0.0, 1.0))


def rated_current_a(part: Part, legs: int) -> float | None:
    """The printed IF(AV) of the dies in use; a rating per package counts half for one of two legs."""
    if part.if_av_a is None or part.dies == 1:
        return part.if_av_a
    per_leg = part.if_av_a if part.if_av_per == "leg" else part.if_av_a / min(part.dies, 2)
    return per_leg * legs


def allowed_current_a(part: Part, legs: int, air_c: float, junction_c: float, power_w: float) -> float | None:
    """The continuous rating where the part really is: in air of `air_c`, its junction at `junction_c`."""
    rated = rated_current_a(part, legs)
    if rated is None or part.if_av_at is None or part.if_av_at_c is None:
        return rated
    here = reference_c(part, air_c, junction_c, power_w)
    return derated_current_a(rated, part.if_av_at_c, max(part.tj_max_c, part.tj_max_forward_only_c or 0.0), here)


def reference_c(part: Part, air_c: float, junction_c: float, power_w: float) -> float:
    """Temperature of the place that the part's rating refers to: air, lead or case."""
    if part.if_av_at == "ambient":
        return air_c
    inner = part.rth_jl_c_per_w if part.if_av_at == "lead" else part.rth_jc_c_per_w
    return max(junction_c - power_w * (inner or 0.0), air_c)


# --- the path ---------------------------------------------------------------------------------------------------------


def heat_path(part: Part, job: Job, worst: Worst) -> Path:
    """The way out for the heat of `part` at the worst continuous current.

    The power is worked out with the maximum drop, at the limit or half way between box and limit, whichever is more.
    Where the sink is left open, the path has the largest that holds the junction at its limit, or a small plate where
    that is more than enough. A closed box is warmed by all the diodes in it.
    """
    heat, legs = job.heat, legs_of(part, job)
    diodes = 1 if job.placement == "array" else job.array.strings
    limit_c = junction_limit_c(part, heat)
    amps = np.array([worst.isc_a * heat.current_factor])
    half_c = 0.5 * (worst.box_c + limit_c) if limit_c > worst.box_c else limit_c
    drops = [forward_drop_v(DiodeCells.of([part.maximum], [legs]), amps, np.array([t]))[0] for t in (half_c, limit_c)]
    power = float(max(drops) * amps[0])
    box = 0.0 if heat.box_area_m2 is None else diodes * thermal.box_self_c_per_w(heat.box_area_m2)
    boxed = "" if box == 0 else f" + {box:.2f} of the box ({diodes} in it)"
    if heat.rth_c_per_w is not None:
        return Path(heat.rth_c_per_w + box, f"stated, junction to air{boxed}", power, None, box_c_per_w=box)
    path = heat.path
    if path == "as_packaged":
        path = "free_air" if part.tab_live is None else "heatsink"
    if path == "heatsink":
        own = thermal.sink_needed_c_per_w(
            limit_c, worst.box_c + box * power, power, case_c_per_w(part), heat.interface_c_per_w
        )
        return sink_path(part, heat, power, own, worst.altitude, diodes, box)
    ja, origin = still_air(part)
    if path == "leads" and part.rth_jl_c_per_w is not None:
        total = part.rth_jl_c_per_w + LEADS_TO_AIR_C_PER_W * worst.altitude
        origin = f"RthJL {part.rth_jl_c_per_w:g} + {LEADS_TO_AIR_C_PER_W:g} leads to air (estimate)"
    elif path == "leads":
        total, origin = 0.6 * ja * worst.altitude, f"0.6 × {origin} for held leads (estimate)"
    elif path == "pcb":
        total, origin = ja * worst.altitude, f"{origin}, as on the sheet's board"
    else:
        total = ja * worst.altitude
    return Path(total + box, origin + boxed, power, None, box_c_per_w=box)


def case_c_per_w(part: Part) -> float:
    """RthJC, or the class value."""
    return CLASS_RTH_JC if part.rth_jc_c_per_w is None else part.rth_jc_c_per_w


def sink_path(
    part: Part, heat: Heat, power: float, own_c_per_w: float, altitude: float, diodes: int, box: float
) -> Path:
    """Through the case into a heatsink of one's own, or one that all diodes share.

    own_c_per_w: what one diode alone may have between sink and air, altitude not taken out.
    """
    jc = case_c_per_w(part)
    origin = f"RthJC {jc:g}" + ("" if part.rth_jc_c_per_w is not None else " (class value)")
    origin += f" + {heat.interface_c_per_w:g} interface"
    boxed = "" if box == 0 else f" + {box:.2f} of the box ({diodes} in it)"
    sharing = diodes if heat.one_sink else 1
    needed = thermal.shared_sink_c_per_w(own_c_per_w, sharing) / altitude
    on_it = "" if sharing == 1 else f" under {sharing} diodes"
    sink = heat.sink_c_per_w
    sink_open = sink is None
    if sink is None:
        sink = min(max(needed, LEAST_SINK_C_PER_W / sharing), SMALL_SINK_C_PER_W)
    elif heat.sink_quoted_rise_c is not None:
        sink = thermal.sink_at_rise_c_per_w(sink, power * sharing, heat.sink_quoted_rise_c)
    total = jc + heat.interface_c_per_w + sink * altitude * sharing + box
    return Path(total, f"{origin} + a sink of {figure(sink)}{on_it}{boxed}", power, needed, sink_open, box)


# --- the worst hour ---------------------------------------------------------------------------------------------------


def hot_parts(job: Job, worst: Worst, rule_factor: float) -> list[HotPart]:
    """The worst hour for all parts at once, the sinks that are left open chosen so that every heat limit holds."""
    if not job.parts:
        return []
    crowd = _Crowd.of(job, worst, rule_factor)
    paths = [heat_path(part, job, worst) for part in job.parts]
    paths = _with_sinks_that_hold(crowd, paths)
    return crowd.at(paths)


@dataclass(frozen=True, slots=True, eq=False)
class _Crowd:
    """All parts of a job side by side."""

    job: Job
    worst: Worst
    legs: list[int]
    typical: DiodeCells
    maximum: DiodeCells
    heat_a: float
    rule_a: float
    reverse_v: FloatArray
    limit_c: FloatArray

    @classmethod
    def of(cls, job: Job, worst: Worst, rule_factor: float) -> "_Crowd":
        legs = [legs_of(part, job) for part in job.parts]
        return cls(
            job,
            worst,
            legs,
            DiodeCells.of([part.typical for part in job.parts], legs),
            DiodeCells.of([part.maximum for part in job.parts], legs),
            job.heat.current_factor * worst.isc_a,
            rule_factor * worst.isc_a,
            np.minimum(worst.hot_reverse_v, np.array([part.vrrm_v for part in job.parts])),
            np.array([junction_limit_c(part, job.heat) for part in job.parts]),
        )

    def warmed(self, current_a: float, rth: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Junction and drop of every part, maximum drop, at a continuous current."""
        full = np.full(len(self.legs), current_a)
        return thermal.forward_heat(self.maximum, full, np.full(len(self.legs), self.worst.box_c), rth)

    def holds(self, rth: FloatArray) -> NDArray[np.bool_]:
        """Whether junction, continuous rating and reverse stability all hold with these resistances."""
        junction, _ = self.warmed(self.heat_a, rth)
        fine = junction <= self.limit_c
        rule_c, rule_v = self.warmed(self.rule_a, rth)
        for index, part in enumerate(self.job.parts):
            power = float(rule_v[index]) * self.rule_a
            allowed = allowed_current_a(part, self.legs[index], self.worst.box_c, float(rule_c[index]), power)
            fine[index] &= allowed is None or allowed >= self.rule_a
        balance = thermal.reverse_balance(self.maximum, self.reverse_v, self.worst.box_c, rth, 12)
        stable = ~np.isnan(balance.stable_c)
        stable &= np.isnan(balance.tipping_c) | (junction + MARGINAL_TIPPING_C <= balance.tipping_c)
        return np.asarray(fine & stable)

    def at(self, paths: Sequence[Path]) -> list[HotPart]:
        """Every part at its worst hour with these paths."""
        rth = np.array([path.rth_c_per_w for path in paths])
        junction, drop = self.warmed(self.heat_a, rth)
        rule_c, rule_v = self.warmed(self.rule_a, rth)
        usual_a = self.job.array.label.imp_a * self.worst.strings_per_diode
        _, usual_v = self.warmed(usual_a, rth)
        typ = thermal.reverse_balance(self.typical, self.reverse_v, self.worst.box_c, rth)
        most = thermal.reverse_balance(self.maximum, self.reverse_v, self.worst.box_c, rth)
        forward_w = self.heat_a * forward_drop_v(self.maximum, np.full(len(rth), self.heat_a), self.limit_c)
        reverse_w = self.reverse_v * reverse_a(self.maximum, self.reverse_v, self.limit_c)
        return [
            HotPart(
                paths[i],
                self.legs[i],
                self.heat_a,
                float(junction[i]),
                float(drop[i]),
                float(rule_c[i]),
                float(rule_v[i]) * self.rule_a,
                float(usual_v[i]),
                float(self.reverse_v[i]),
                float(typ.stable_c[i]),
                float(most.stable_c[i]),
                float(typ.tipping_c[i]),
                float(most.tipping_c[i]),
                float(typ.critical_ambient_c[i]),
                float(most.critical_ambient_c[i]),
                thermal.allowable_ambient_c(
                    float(self.limit_c[i]), float(rth[i]), float(forward_w[i]), float(reverse_w[i])
                ),
            )
            for i in range(len(rth))
        ]


def _with_sinks_that_hold(crowd: _Crowd, paths: list[Path]) -> list[Path]:
    """The paths, their open sinks made no larger than every heat limit allows.

    By halving on a logarithmic scale: a smaller resistance never makes a limit worse. Where even the least practical
    sink does not hold, the path keeps what the junction alone asks for, and the checks say what fails.
    """
    is_open = np.array([path.sink_open for path in paths])
    if not is_open.any():
        return paths
    job, worst = crowd.job, crowd.worst
    base = np.array(
        [
            case_c_per_w(part) + job.heat.interface_c_per_w + path.box_c_per_w if path.sink_open else path.rth_c_per_w
            for part, path in zip(job.parts, paths, strict=True)
        ]
    )
    low, high = np.full(len(paths), LEAST_SINK_C_PER_W), np.full(len(paths), LARGEST_SINK_C_PER_W)
    best_holds = crowd.holds(base + np.where(is_open, low, 0.0))
    for _ in range(11):  # 0.3 to 60 in 2^11 steps of 0.26 %
        middle = np.sqrt(low * high)
        holds = crowd.holds(base + np.where(is_open, middle, 0.0))
        low, high = np.where(holds, middle, low), np.where(holds, high, middle)
    diodes = 1 if job.placement == "array" else job.array.strings
    sharing = diodes if job.heat.one_sink else 1
    out = []
    for index, (part, path) in enumerate(zip(job.parts, paths, strict=True)):
        if not path.sink_open or path.sink_needed_c_per_w is None or not best_holds[index]:
            out.append(path)
            continue
        own = min(path.sink_needed_c_per_w * sharing * worst.altitude, float(low[index]))
        made = sink_path(part, job.heat, path.power_w, own, worst.altitude, diodes, path.box_c_per_w)
        out.append(replace(made, sink_open=True))
    return out
