"""Every candidate judged, and put in order."""

import math
from dataclasses import replace

from server.physics import thermal
from server.selection import ratings
from server.selection.heating import HotPart, Path, Worst
from server.selection.job import Job
from server.selection.ranking import NONE_KEY, RESOLUTION_FRAC, VALVE_KEY, Entry, order
from server.selection.result import Candidate, Check, Ledger, SiteFacts, Standing
from server.selection.solving import Solved, Table


def judged(job: Job, worst: Worst, hot: list[HotPart], table: Table, solved: Solved) -> list[Candidate]:
    """Every part, then no diode, then the perfect valve, judged but not yet in order."""
    out = []
    sharing = job.array.strings if job.heat.one_sink and job.placement == "per_string" else 1
    for index, part in enumerate(job.parts):
        checks = ratings.part_checks(part, job, worst, hot[index])
        path = hot[index].path
        standing, reasons = _standing(checks)
        if standing != "fail" and ratings.is_active(part) and job.charge.controller == "shunt":
            standing = "confirm"
            reasons = ("its maker must confirm it with a regulator that shorts the panel", *reasons)
        maximum = index + table.parts
        out.append(
            Candidate(
                part.key,
                part.type,
                part.technology,
                part,
                standing,
                None,
                solved.ledgers[index],
                solved.ledgers[maximum],
                solved.bands[index],
                solved.bands[maximum],
                checks,
                hot[index].junction_c,
                path.power_w,
                path.rth_c_per_w,
                path.origin,
                path.sink_needed_c_per_w,
                _sink_to_buy(path, sharing),
                hot[index].in_reverse(),
                False,
                reasons,
            )
        )
    bare_a = solved.bands[table.none].night_a[2] / job.array.strings
    checks = ratings.none_checks(job, worst, bare_a)
    standing, reasons = _standing(checks)
    out.append(_reference(NONE_KEY, "No diode", "none", standing, reasons, checks, table.none, solved))
    out.append(_reference(VALVE_KEY, "Perfect valve", "reference", "reference", (), (), table.valve, solved))
    return out


def _reference(
    key: str,
    title: str,
    technology: str,
    standing: Standing,
    reasons: tuple[str, ...],
    checks: tuple[Check, ...],
    column: int,
    solved: Solved,
) -> Candidate:
    made, band = solved.ledgers[column], solved.bands[column]
    return Candidate(
        key,
        title,
        technology,
        None,
        standing,
        None,
        made,
        made,
        band,
        band,
        checks,
        None,
        None,
        None,
        "",
        None,
        None,
        None,
        False,
        reasons,
    )


def _sink_to_buy(path: Path, sharing: int) -> float | None:
    """The needed sink's figure as catalogues quote it, at 75 °C of rise; None where no sink helps or none is asked."""
    needed = path.sink_needed_c_per_w
    if needed is None or needed <= 0:
        return None
    return thermal.sink_to_buy_c_per_w(needed, path.power_w * sharing)


def _standing(checks: tuple[Check, ...]) -> tuple[Standing, tuple[str, ...]]:
    """The worst of the checks, and the sentences of those that are not met."""
    failed = tuple(item.sentence for item in checks if item.outcome == "fail")
    if failed:
        return "fail", failed
    near = tuple(item.sentence for item in checks if item.outcome == "marginal")
    return ("marginal", near) if near else ("pass", ())


def resolution(valve: Ledger, facts: SiteFacts) -> float:
    """The least difference in net energy that means anything, Wh a day.

    A share of the deciding period's harvest; where that is next to nothing (a polar winter), of a tenth of the year's.
    """
    days = sum(facts.period_days)
    mean_wh = valve.year_delivered_wh / days if days > 0 else 0.0
    return RESOLUTION_FRAC * max(valve.delivered_wh[facts.deciding_period], 0.1 * mean_wh)


def _entry(item: Candidate, period: int, standing: Standing | None = None) -> Entry:
    typical, maximum = item.typical, item.maximum
    return Entry(
        item.key, standing or item.standing, typical.net_wh[period], typical.year_heat_wh, maximum.net_wh[period]
    )


def ranked(job: Job, candidates: list[Candidate], period: int, resolution_wh: float) -> list[Candidate]:
    """In order of rank, then what failed by net energy, then the perfect valve."""
    keys, tied = order([_entry(item, period) for item in candidates], resolution_wh)
    if job.charge.blocks_at_night == "yes" and NONE_KEY in keys:
        keys = [NONE_KEY, *(key for key in keys if key != NONE_KEY)]  # nothing is left for a diode to save
    by_key = {item.key: item for item in candidates}
    ranked = [replace(by_key[key], rank=place + 1, tied=key in tied) for place, key in enumerate(keys)]
    failed = sorted((c for c in candidates if c.standing == "fail"), key=lambda c: (_last(c, period), c.key))
    return ranked + failed + [c for c in candidates if c.standing == "reference"]


def _last(candidate: Candidate, period: int) -> float:
    """Sorts by falling net energy, what has no ledger last."""
    net_wh = candidate.typical.net_wh[period]
    return -net_wh if math.isfinite(net_wh) else math.inf


def under_double_rule(
    job: Job, worst: Worst, candidates: list[Candidate], facts: SiteFacts, resolution_wh: float
) -> str | None:
    """The choice were VRRM held to 2 × cold Voc; None where that changes nothing or is the rule already."""
    if (ratings.voc_factor(job.rule) or 0.0) >= 2.0 or job.charge.blocks_at_night == "yes":
        return None
    period = facts.deciding_period
    entries = []
    for item in candidates:
        too_low = item.part is not None and item.part.vrrm_v < 2.0 * worst.cold_voc_v
        standing: Standing = "fail" if too_low else item.standing
        entries.append(_entry(item, period, standing))
    keys, _ = order(entries, resolution_wh)
    best = next((item.key for item in candidates if item.rank == 1), None)
    if best is None or (keys and keys[0] == best):
        return None
    return keys[0] if keys else "nothing"
