"""The order of the candidates, and the reason in words."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from server.selection.figures import ampere_hours, figure
from server.selection.job import Job
from server.selection.ratings import string_protection_needed
from server.selection.result import Candidate, Check, DarkBand, SiteFacts, Standing, Verdict, VerdictKind

# Differences below this share of the deciding period's harvest are no difference: they lie under what is knowable of a
# site, and the cooler part is the better one.
RESOLUTION_FRAC = 0.002
NEAR_KNEE_FRAC = 0.3  # above this share of the heat lost to the bank, the words change
MARGINAL_HANDICAP = 5.0  # so many resolutions must a marginal part be better than a sound one
NONE_KEY, VALVE_KEY = "none", "perfect-valve"

# What a failed check of the site asks for, whichever part is fitted.
SITE_DUTIES = {
    "self_regulated": "First fit a charge regulator: without one this array overcharges the bank.",
    "string_fuse": "Fuse every string as well.",
}

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
    worst_net_wh: float | None = None
    """Net energy with a part at its maximum; None: the same."""

    @property
    def at_worst_wh(self) -> float:
        """Net energy with the worst part of the type."""
        return self.net_wh if self.worst_net_wh is None else self.worst_net_wh


def order(entries: Sequence[Entry], resolution_wh: float) -> tuple[list[str], set[str]]:
    """Keys from best to worst, and the equals of the best.

    What fails and the reference are left out; what a maker must confirm comes last. Of the rest the greatest net energy
    leads, a marginal candidate giving `MARGINAL_HANDICAP` resolutions away. Those within the resolution of the leader
    are its equals: first those that stay so with a part at its sheet's maximum, then the cooler over the year, and no
    diode is the coolest. Then the same again with the others. A candidate without a number comes last of its kind.
    """
    keys: list[str] = []
    tied: set[str] = set()
    for kinds in (("pass", "marginal"), ("confirm",)):
        rest = [entry for entry in entries if entry.standing in kinds and math.isfinite(entry.net_wh)]
        lost = [entry.key for entry in entries if entry.standing in kinds and not math.isfinite(entry.net_wh)]
        first = not keys
        while rest:
            best = max(_score(entry, resolution_wh) for entry in rest)
            equals = [entry for entry in rest if best - _score(entry, resolution_wh) <= resolution_wh]
            firm = max(entry.at_worst_wh for entry in equals) - resolution_wh
            equals.sort(key=lambda entry: _among_equals(entry, firm))
            rest = [entry for entry in rest if best - _score(entry, resolution_wh) > resolution_wh]
            if first and len(equals) > 1:
                tied.update(entry.key for entry in equals)
            first = False
            keys += [entry.key for entry in equals]
        keys += lost
    return keys, tied


def _among_equals(entry: Entry, firm_wh: float) -> tuple[bool, float, bool, bool, float, str]:
    """Sorts the leader's equals: firm first, then the coolest, then no diode, then sound ones."""
    loose = not entry.at_worst_wh >= firm_wh
    return loose, entry.heat_wh, entry.key != NONE_KEY, entry.standing != "pass", -entry.net_wh, entry.key


def _score(entry: Entry, resolution_wh: float) -> float:
    return entry.net_wh - (MARGINAL_HANDICAP * resolution_wh if entry.standing == "marginal" else 0.0)


@dataclass(frozen=True, slots=True)
class Corner:
    """The best keys where all parts are typical or maximum, at one dark current of the string."""

    best: str
    equals: frozenset[str]


def corners(candidates: Sequence[Candidate], period: int, resolution_wh: float) -> dict[tuple[str, str], Corner]:
    """The answer for typical and maximum parts, and for a low, middle and high dark current of the string."""
    found = {}
    for corner in ("typical", "maximum"):
        for index, dark in enumerate(("low", "middle", "high")):
            entries = []
            for item in candidates:
                band: DarkBand = item.dark_typical if corner == "typical" else item.dark_maximum
                ledger = item.typical if corner == "typical" else item.maximum
                entries.append(Entry(item.key, item.standing, band.net_wh[index], ledger.year_heat_wh))
            keys, tied = order(entries, resolution_wh)
            if keys:
                found[corner, dark] = Corner(keys[0], frozenset(tied or keys[:1]))
    return found


def when(facts: SiteFacts) -> str:
    """The deciding period as an adverb: "in December", "on the stated day"."""
    name = facts.periods[facts.deciding_period]
    return f"in {name}" if len(facts.periods) > 1 else f"on {name}"


def verdict(
    job: Job,
    facts: SiteFacts,
    candidates: Sequence[Candidate],
    resolution_wh: float,
    rule_winner: str | None,
    site_checks: Sequence[Check] = (),
) -> Verdict:
    """The answer and what it hangs on. `rule_winner`: the best key were 2 × cold Voc asked, None where it is the same.

    `candidates` come in order; `site_checks` that fail ask for something beside the diode, which the sentence says.
    """
    ranked = [item for item in candidates if item.rank is not None]
    by_key = {item.key: item for item in candidates}
    period = facts.deciding_period
    also = "".join(f" {SITE_DUTIES[c.code]}" for c in site_checks if c.outcome == "fail" and c.code in SITE_DUTIES)
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
            sentence + "." + also,
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
    by_corner = corners(candidates, period, resolution_wh)
    blocked = job.charge.blocks_at_night == "yes" and best.key == NONE_KEY
    stable = blocked or all(best.key in corner.equals for corner in by_corner.values())
    shaky = not blocked and any(NONE_KEY in corner.equals for corner in by_corner.values()) and best.key != NONE_KEY
    kind, sentence = _sentence(job, facts, best, none, ranked, resolution_wh)
    return Verdict(
        kind,
        sentence + also,
        best.key,
        None if runner is None else runner.key,
        _because(job, facts, best, runner, none, plain_equal(ranked, best)),
        _would_change(job, best, by_corner, by_key, rule_winner),
        stable and not shaky,
        _stability(best, by_corner, by_key, blocked),
    )


def _none_sentence(facts: SiteFacts, none: Candidate, ranked: Sequence[Candidate], resolution_wh: float) -> str:
    """Why no diode, said only as far as it is true."""
    period, month = facts.deciding_period, when(facts)
    drain = ampere_hours(none.typical.night_drain_ah[period])
    taken = f"the string takes about {drain} a night out of the bank"
    sound = [item for item in ranked if item.standing == "pass" and item.key != NONE_KEY]
    others = [item for item in ranked if item.key != NONE_KEY]
    if not others:
        return (
            f"Fit none for now: no candidate passes its checks here, and {taken} ({month}); look for a part with the "
            "ratings that fail, or a cooler place."
        )
    best = max((sound or others), key=lambda item: item.typical.net_wh[period])
    gap = none.typical.net_wh[period] - best.typical.net_wh[period]
    if abs(gap) <= resolution_wh:
        return f"Fit none: {taken}, and no candidate would give the bank measurably more ({month})."
    if gap > 0:
        return f"Fit none: {taken}, less than any candidate's drop costs by day ({month})."
    return (
        f"Fit none for now: {taken} ({month}); {best.title} would save most of it but is {_standing_words(best)}, so "
        "look for a part or a place with more margin."
    )


def _sentence(
    job: Job,
    facts: SiteFacts,
    best: Candidate,
    none: Candidate,
    ranked: Sequence[Candidate],
    resolution_wh: float,
) -> tuple[VerdictKind, str]:
    period = facts.deciding_period
    month = when(facts)
    if best.key == NONE_KEY:
        if job.charge.blocks_at_night == "yes":
            return "controller_blocks", (
                "Fit none: your controller already blocks at night, so a diode would only cost "
                "energy by day and save nothing by night."
            )
        return "fit_none", _none_sentence(facts, none, ranked, resolution_wh)
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


def plain_equal(candidates: Sequence[Candidate], choice: Candidate | None) -> Candidate | None:
    """The first plain diode among the equals of a chosen active rectifier, sound and firm enough to take instead."""
    if choice is None or choice.technology != "active" or not choice.tied:
        return None
    plain = (c for c in candidates if c.tied and c.part is not None and c.technology != "active")
    return next((c for c in plain if c.standing == choice.standing), None)


def _because(
    job: Job,
    facts: SiteFacts,
    best: Candidate,
    runner: Candidate | None,
    none: Candidate,
    plain: Candidate | None,
) -> tuple[str, ...]:
    period = facts.deciding_period
    month = when(facts)
    harvest = best.typical.delivered_wh[period]
    lines = []
    lines += _ledgers_in_words(job, best, period)
    if plain is not None and plain is not runner:
        lines.append(
            f"{plain.title} is as good within {100 * RESOLUTION_FRAC:g} % of the harvest, and a plain diode: the "
            "simpler one to buy and fit"
        )
    if runner is not None:
        gap = best.typical.net_wh[period] - runner.typical.net_wh[period]
        share = 100 * gap / harvest if harvest > 0 else 0.0
        if best.standing != runner.standing:
            lines.append(f"runner-up is {runner.title}, which is {_standing_words(runner)}")
        elif best.tied and runner.tied:
            edge = "no diode has nothing to fail" if best.key == NONE_KEY else f"{best.title} runs cooler"
            if plain is runner:
                edge += f"; {runner.title} is a plain diode, the simpler one to buy and fit"
            lines.append(
                f"runner-up is {runner.title}: within {100 * RESOLUTION_FRAC:g} % of the harvest they are equal, and "
                f"{edge}"
            )
        else:
            lines.append(f"runner-up is {runner.title}, {gap:.2f} Wh a day ({share:.2f} %) behind {month}")
    if best.part is not None and none.standing != "fail" and job.charge.blocks_at_night != "yes":
        gap_ah = best.typical.net_ah[period] - none.typical.net_ah[period]
        lines.append(f"against no diode it is worth {ampere_hours(gap_ah)} a day {month}")
    if facts.array_w > 0 and best.part is not None and harvest > 0:
        watts = facts.array_w * best.typical.day_loss_wh[period] / harvest
        lines.append(
            f"its drop costs as much as {figure(watts)} W of panel"
            if watts >= 0.05
            else "its drop costs no panel worth naming"
        )
    return tuple(lines)


def _ledgers_in_words(job: Job, best: Candidate, period: int) -> list[str]:
    """What the drop does here: heat is one thing, what the bank misses another."""
    if best.key == NONE_KEY:
        return []
    heat_wh, loss_wh = best.typical.heat_wh[period], max(best.typical.day_loss_wh[period], 0.0)
    if heat_wh <= 0:
        return []
    pair = f"of {figure(heat_wh)} Wh of heat a day the bank misses " + (
        f"{figure(loss_wh)} Wh" if loss_wh >= 0.01 * heat_wh else "next to nothing"
    )
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
    by_corner: dict[tuple[str, str], Corner],
    by_key: dict[str, Candidate],
    rule_winner: str | None,
) -> tuple[str, ...]:
    lines = []
    charge = job.charge
    if charge.blocks_at_night == "unknown" and best.key != NONE_KEY and charge.controller != "shunt":
        lines.append(
            "if the controller blocks at night by itself, fit none: read its manual, or well after dark put a "
            "milliammeter in the panel lead; next to nothing there means that it blocks"
        )
    if charge.blocks_at_night == "yes" and best.key == NONE_KEY:
        lines.append(
            "if a night reading shows current flowing back through the controller, ask again with blocking: no"
        )
    else:
        lines += _by_dark_current(best, by_corner, by_key)
        worst = by_corner.get(("maximum", "middle"))
        if worst is not None and best.key not in worst.equals and worst.best != NONE_KEY:
            lines.append(
                f"with every part at its sheet's maximum, {by_key[worst.best].title} is better: measure the part in "
                "hand"
            )
    if rule_winner is not None:
        title = by_key[rule_winner].title if rule_winner in by_key else "none of the candidates"
        lines.append(f"if the rule of 2 × cold Voc applies here, {title} is the choice")
    fuse, isc = job.array.max_series_fuse_a, job.array.label.isc_a
    if job.array.strings == 2 and (fuse is None or string_protection_needed(3, isc, fuse)):
        lines.append(
            "a third string: then fuse each string" + ("" if fuse else " unless the label's maximum fuse allows it")
        )
    return tuple(lines)


def _by_dark_current(
    best: Candidate, by_corner: dict[tuple[str, str], Corner], by_key: dict[str, Candidate]
) -> list[str]:
    """Where in its band the string's dark current would turn the answer, and whether it would turn or only tie."""
    lines = []
    for dark in ("low", "high"):
        corner = by_corner.get(("typical", dark))
        if corner is None:
            continue
        end = f"if the string's dark current is at the {dark} end of its band"
        if best.key not in corner.equals:
            lines.append(f"{end}, {by_key[corner.best].title} is better: one night reading settles it")
        elif best.key != NONE_KEY and NONE_KEY in corner.equals:
            lines.append(f"{end}, no diode is as good: one night reading settles it")
    return lines


def _stability(
    best: Candidate, by_corner: dict[tuple[str, str], Corner], by_key: dict[str, Candidate], blocked: bool
) -> tuple[str, ...]:
    lines = []
    for (corner, dark), found in by_corner.items():
        if blocked:
            continue
        if best.key not in found.equals:
            lines.append(f"{corner} parts, {dark} dark current: {by_key[found.best].title} is better")
        elif best.key != NONE_KEY and NONE_KEY in found.equals:
            lines.append(f"{corner} parts, {dark} dark current: no diode is as good")
    if lines:
        return tuple(lines)
    return ("the same choice holds for typical and maximum parts and for a low, middle and high dark current",)
