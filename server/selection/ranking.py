"""The order of the candidates, and the reason in words."""

from collections.abc import Sequence
from dataclasses import dataclass

from server.selection.job import Job
from server.selection.result import Candidate, DarkBand, SiteFacts, Standing, Verdict, VerdictKind

# Differences below this share of the deciding period's harvest are no difference: they lie under what is knowable of a
# site, and the cooler part is the better one.
RESOLUTION_FRAC = 0.002
NEAR_KNEE_FRAC = 0.3  # above this share of the heat lost to the bank, the words change
_CLASS: dict[Standing, int] = {"pass": 0, "marginal": 1, "confirm": 2, "fail": 3, "reference": 4}
NONE_KEY, VALVE_KEY = "none", "perfect-valve"

TECHNOLOGY_WORDS = {
    "pn_silicon": "silicon diode",
    "schottky": "Schottky",
    "trench_schottky": "trench Schottky",
    "super_barrier": "super-barrier rectifier",
    "sic_schottky": "SiC Schottky",
    "active": "active rectifier",
    "none": "no diode",
    "reference": "reference",
}


@dataclass(frozen=True, slots=True)
class Entry:
    """What ranking needs to know of a candidate."""

    key: str
    standing: Standing
    net_wh: float
    heat_wh: float


def order(entries: Sequence[Entry], resolution_wh: float) -> tuple[list[str], set[str]]:
    """Keys from best to worst, and those within the resolution of the best of their standing.

    First those that pass all checks, then the marginal ones, then those that a maker must confirm; what fails and the
    reference are left out. Within a standing the greatest net energy leads; those within the resolution of the leader
    are its equals, and the coolest of them comes first; then the same again with the rest.
    """
    keys: list[str] = []
    tied: set[str] = set()
    for standing in ("pass", "marginal", "confirm"):
        rest = [entry for entry in entries if entry.standing == standing]
        first = True
        while rest:
            best = max(entry.net_wh for entry in rest)
            equals = [entry for entry in rest if best - entry.net_wh <= resolution_wh]
            equals.sort(key=lambda entry: (entry.heat_wh, -entry.net_wh, entry.key))
            rest = [entry for entry in rest if best - entry.net_wh > resolution_wh]
            if first and len(equals) > 1:
                tied.update(entry.key for entry in equals)
            first = False
            keys += [entry.key for entry in equals]
    return keys, tied


def winners_by_corner(candidates: Sequence[Candidate], period: int, resolution_wh: float) -> dict[tuple[str, str], str]:
    """The best key for typical and maximum parts, and for a low, middle and high dark current of the string."""
    found = {}
    for corner in ("typical", "maximum"):
        for index, dark in enumerate(("low", "middle", "high")):
            entries = []
            for item in candidates:
                band: DarkBand = item.dark_typical if corner == "typical" else item.dark_maximum
                ledger = item.typical if corner == "typical" else item.maximum
                entries.append(Entry(item.key, item.standing, band.net_wh[index], ledger.heat_wh[period]))
            keys, _ = order(entries, resolution_wh)
            if keys:
                found[corner, dark] = keys[0]
    return found


def when(facts: SiteFacts) -> str:
    """The deciding period as an adverb: "in December", "on the stated day"."""
    name = facts.periods[facts.deciding_period]
    return f"in {name}" if len(facts.periods) > 1 else f"on {name}"


def milli(value_a: float) -> str:
    """A current in the unit a meter would show."""
    size = abs(value_a)
    if size >= 1:
        return f"{value_a:.1f} A"
    if size >= 1e-3:
        return f"{1e3 * value_a:.2g} mA" if size < 0.1 else f"{1e3 * value_a:.0f} mA"
    return f"{1e6 * value_a:.2g} µA"


def ampere_hours(value_ah: float) -> str:
    """An amount of charge in Ah, or mAh where that reads better."""
    size = abs(value_ah)
    if size >= 0.1:
        return f"{value_ah:.2f} Ah"
    if size >= 1e-3:
        return f"{1e3 * value_ah:.1f} mAh" if size < 0.01 else f"{1e3 * value_ah:.0f} mAh"
    return f"{1e3 * value_ah:.2g} mAh" if size > 0 else "0 mAh"


def verdict(
    job: Job,
    facts: SiteFacts,
    candidates: Sequence[Candidate],
    resolution_wh: float,
    rule_winner: str | None,
) -> Verdict:
    """The answer and what it hangs on. `rule_winner`: the best key were 2 × cold Voc asked, None where it is the same.

    `candidates` come in order.
    """
    ranked = [item for item in candidates if item.rank is not None]
    by_key = {item.key: item for item in candidates}
    period = facts.deciding_period
    if not ranked:
        failed = [item for item in candidates if item.standing == "fail"]
        because = tuple(f"{item.title}: {item.reasons[0]}" for item in failed[:5] if item.reasons)
        sentence = (
            "Nothing here is safe: every candidate fails a check"
            if job.charge.controller != "shunt"
            else "Nothing here is safe: this regulator needs a series diode, and every candidate fails a check"
        )
        return Verdict(
            "nothing_safe",
            sentence + ".",
            None,
            None,
            because,
            ("a part with other ratings, or a cooler place for it",),
            True,
            (),
        )
    best = ranked[0]
    runner = ranked[1] if len(ranked) > 1 else None
    none = by_key[NONE_KEY]
    winners = winners_by_corner(candidates, period, resolution_wh)
    stable = len(set(winners.values())) == 1
    kind, sentence = _sentence(job, facts, best, none)
    return Verdict(
        kind,
        sentence,
        best.key,
        None if runner is None else runner.key,
        _because(job, facts, best, runner, none),
        _would_change(job, best, winners, by_key, rule_winner),
        stable,
        _stability(winners, best, by_key),
    )


def _sentence(job: Job, facts: SiteFacts, best: Candidate, none: Candidate) -> tuple[VerdictKind, str]:
    period = facts.deciding_period
    month = when(facts)
    if best.key == NONE_KEY:
        if job.charge.blocks_at_night == "yes":
            return "controller_blocks", (
                "Fit none: your controller already blocks at night, so a diode would only cost "
                "energy by day and save nothing by night."
            )
        drain = ampere_hours(none.typical.night_drain_ah[period])
        return "fit_none", (
            f"Fit none: the string takes about {drain} a night out of the bank, less than any candidate's drop costs "
            "by "
            f"day ({month})."
        )
    quantity = 1 if job.placement == "array" else job.array.strings
    place = (
        "for the whole array" if job.placement == "array" else ("in the string" if quantity == 1 else "in each string")
    )
    words = TECHNOLOGY_WORDS.get(best.technology, best.technology)
    loss = ampere_hours(best.typical.day_loss_ah[period])
    drain = ampere_hours(best.typical.night_drain_ah[period])
    bare = ampere_hours(none.typical.night_drain_ah[period])
    text = (
        f"Fit {quantity} × {best.title} ({words}), one {place}: {month} the bank misses {loss} a day and gives up "
        f"{drain} a night, against {bare} a night without a diode"
    )
    if job.charge.controller == "shunt":
        text += "; with this regulator a series diode is a must"
    elif job.charge.blocks_at_night == "unknown":
        text += "; if the controller turns out to block by itself, fit none"
    if best.standing == "marginal":
        text += ". It is marginal in one check"
    elif best.standing == "confirm":
        text += ". Its maker must confirm it for this regulator"
    return "fit_part", text + "."


def _because(job: Job, facts: SiteFacts, best: Candidate, runner: Candidate | None, none: Candidate) -> tuple[str, ...]:
    period = facts.deciding_period
    month = when(facts)
    harvest = best.typical.delivered_wh[period]
    lines = []
    lines += _ledgers_in_words(job, best, period)
    if runner is not None:
        gap = best.typical.net_wh[period] - runner.typical.net_wh[period]
        share = 100 * gap / harvest if harvest > 0 else 0.0
        if best.standing != runner.standing:
            lines.append(f"runner-up is {runner.title}, which is {_standing_words(runner)}")
        elif best.tied and runner.tied:
            lines.append(
                f"runner-up is {runner.title}: within {100 * RESOLUTION_FRAC:g} % of the harvest they are equal, and "
                f"{best.title} runs cooler"
            )
        else:
            lines.append(f"runner-up is {runner.title}, {gap:.2f} Wh a day ({share:.2f} %) behind {month}")
    if best.part is not None and none.standing != "fail" and job.charge.blocks_at_night != "yes":
        gap_ah = best.typical.net_ah[period] - none.typical.net_ah[period]
        lines.append(f"against no diode it is worth {ampere_hours(gap_ah)} a day {month}")
    if facts.array_w > 0 and best.part is not None and harvest > 0:
        watts = facts.array_w * best.typical.day_loss_wh[period] / harvest
        lines.append(f"its drop costs as much as {watts:.1f} W of panel")
    return tuple(lines)


def _ledgers_in_words(job: Job, best: Candidate, period: int) -> list[str]:
    """What the drop does here: heat is one thing, what the bank misses another."""
    if best.key == NONE_KEY:
        return []
    heat_wh, loss_wh = best.typical.heat_wh[period], max(best.typical.day_loss_wh[period], 0.0)
    pair = f"of {heat_wh:.1f} Wh of heat a day the bank misses {loss_wh:.1f} Wh"
    if job.charge.controller == "mppt":
        return [f"behind a converter nearly all of a diode's heat is lost to the bank: {pair}"]
    if loss_wh < NEAR_KNEE_FRAC * heat_wh:
        return [f"the string works on the flat part of its curve, where a drop costs little: {pair}"]
    return [f"the bank sits near the knee of the string's curve, where a drop costs current: {pair}"]


def _standing_words(item: Candidate) -> str:
    return {"pass": "sound", "marginal": "marginal in a check", "confirm": "only with its maker's word"}.get(
        item.standing, "not allowed here"
    )


def _would_change(
    job: Job,
    best: Candidate,
    winners: dict[tuple[str, str], str],
    by_key: dict[str, Candidate],
    rule_winner: str | None,
) -> tuple[str, ...]:
    lines = []
    if job.charge.blocks_at_night == "unknown" and best.key != NONE_KEY and job.charge.controller != "shunt":
        lines.append(
            "if the controller blocks at night by itself, fit none: read its manual, or measure one night current"
        )
    if job.charge.blocks_at_night == "yes" and best.key == NONE_KEY:
        lines.append(
            "if a night reading shows current flowing back through the controller, ask again with blocking: no"
        )
    low, high = winners.get(("typical", "low")), winners.get(("typical", "high"))
    for dark, key in (("low", low), ("high", high)):
        if key is not None and key != best.key:
            lines.append(
                f"if the string's dark current is at the {dark} end of its band, {by_key[key].title} wins: one night "
                "reading settles it"
            )
    worst = winners.get(("maximum", "middle"))
    if worst is not None and worst != best.key:
        lines.append(f"with every part at its sheet's maximum, {by_key[worst].title} wins: measure the part in hand")
    if rule_winner is not None:
        title = by_key[rule_winner].title if rule_winner in by_key else "none of the candidates"
        lines.append(f"if the rule of 2 × cold Voc applies here, {title} is the choice")
    if job.array.strings == 2 and best.key == NONE_KEY:
        lines.append("a third string: then fuse each string")
    return tuple(lines)


def _stability(winners: dict[tuple[str, str], str], best: Candidate, by_key: dict[str, Candidate]) -> tuple[str, ...]:
    if len(set(winners.values())) == 1:
        return ("the same choice holds for typical and maximum parts and for a low, middle and high dark current",)
    lines = []
    for (corner, dark), key in winners.items():
        if key != best.key:
            lines.append(f"{corner} parts, {dark} dark current: {by_key[key].title}")
    return tuple(lines)
