"""Remarks with stable codes: what the reader of an answer must know beside it."""

import math

import numpy as np

from server.physics.diode import DiodeCells, reverse_a
from server.selection.figures import milli
from server.selection.job import Job
from server.selection.ranking import NONE_KEY
from server.selection.result import Candidate, Note
from server.selection.site import Site, StringFit


def notes_on(
    job: Job, site: Site, string: StringFit, choice: Candidate | None, candidates: list[Candidate]
) -> tuple[Note, ...]:
    """Remarks with stable codes."""
    notes = []
    if site.days.rough:
        notes.append(Note("climate_rough", f"climate: {site.days.source}"))
    notes += _unsettled(candidates)
    reading = job.array.night_reading
    if reading is not None:
        _, exists = string.spec.dark_shunt_from_reading_ohm(reading.reading_a, reading.terminal_v, reading.cell_c)
        if not exists:
            notes.append(
                Note(
                    "night_reading_low",
                    f"the night reading of {reading.reading_a:g} A is less than the model's cells take by themselves; "
                    "it is used as the lowest the model can give",
                )
            )
    if job.charge.blocks_at_night == "unknown" and job.charge.controller != "shunt":
        bare = next(item for item in candidates if item.key == NONE_KEY).typical
        net_ah = max((d + n for d, n in zip(bare.net_ah, bare.night_drain_ah, strict=True)), default=0.0)
        notes.append(
            Note(
                "blocking_unknown",
                "whether the controller blocks at night is unknown: the string's drain is given as if it did not. If "
                f"it does, that drain is zero for every candidate, and no diode is best, with up to {net_ah:.2f} Ah a "
                "day net",
            )
        )
    if job.charge.controller == "shunt" and choice is not None and choice.part is not None:
        notes.append(_shunted_note(job, choice))
    if choice is not None and choice.part is not None:
        for remark in choice.part.warnings:
            notes.append(Note(f"part_{remark.code}", f"{choice.title}: {remark.sentence}"))
        notes += _outside_print(job, choice)
    if string.fit is not None and string.fit.worst[1] > 0.005:
        field, misfit = string.fit.worst
        notes.append(Note("label_misfit", f"the module model misses the label's {field} by {100 * misfit:.1f} %"))
    return tuple(notes)


def _shunted_note(job: Job, choice: Candidate) -> Note:
    """What leaks back while the regulator holds the panel shorted, by day and hot: in no ledger, so said here."""
    part = choice.part
    assert part is not None  # noqa: S101
    junction = np.array(choice.hottest_junction_c or 60.0)
    legs = part.parallel_legs if job.legs == "both" else 1
    leaks = reverse_a(DiodeCells.of([part.typical, part.maximum], [legs, legs]), np.array(job.bank.full_v), junction)
    low, high = (float(x) for x in leaks)
    return Note(
        "shunted_leak",
        f"while the regulator shorts the panel the hot diode leaks {milli(low)} to {milli(high)} back at worst; these "
        "minutes are not in the ledger",
    )


def _outside_print(job: Job, choice: Candidate) -> list[Note]:
    """Where the job takes the chosen part outside what its sheets print."""
    part = choice.part
    if part is None:
        return []
    forward = [p for sheet in part.sheets for p in sheet.forward]
    reverse = [p for sheet in part.sheets for p in sheet.reverse if p.junction_c is not None]
    notes = []
    strings = job.array.strings if job.placement == "array" else 1
    amps = job.heat.current_factor * job.array.label.isc_a * strings / (part.parallel_legs if job.legs == "both" else 1)
    if forward and amps > 1.01 * (most := max(p.current_a for p in forward)):
        notes.append(
            Note(
                "above_printed_current",
                f"{choice.title}: {amps:.1f} A a leg; its drop is printed up to {most:g} A only",
            )
        )
    hottest = choice.hottest_junction_c
    if reverse and hottest is not None and hottest > 5.0 + (top := max(p.junction_c or 0.0 for p in reverse)):
        notes.append(
            Note(
                "above_printed_heat",
                f"{choice.title}: its junction may reach {hottest:.0f} °C; leakage is printed up to {top:g} °C only",
            )
        )
    return notes


def _unsettled(candidates: list[Candidate]) -> list[Note]:
    """Candidates without a full ledger, because some of their cells did not settle."""
    burnt = [c.title for c in candidates if c.standing == "fail" and not math.isfinite(c.maximum.year_net_wh)]
    open_ended = [c.title for c in candidates if c.standing != "fail" and not math.isfinite(c.maximum.year_net_wh)]
    notes = []
    if burnt:
        some = ", ".join(burnt[:6]) + (f" and {len(burnt) - 6} more" if len(burnt) > 6 else "")
        notes.append(Note("no_ledger", f"no ledger for {some}: the current would take their junctions past 400 °C"))
    if open_ended:
        notes.append(Note("not_converged", f"some cells did not settle for {', '.join(open_ended)}; they are left out"))
    return notes
