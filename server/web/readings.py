"""What a meter should show after fitting: the window at night, the drop by day."""

import math
from dataclasses import dataclass

import numpy as np

from server.physics.diode import DiodeCells, forward_drop_v
from server.selection.job import Job
from server.selection.result import Candidate, Study

DAY_SHARES = (0.25, 0.5, 1.0)
METER_FRAC = 0.05  # a meter and a joint, added on both sides
READING_AIR_C = 30.0  # air around the diode while someone measures


@dataclass(frozen=True, slots=True)
class DropReading:
    """Volts across the whole part at a current, with the junction at about `junction_c`."""

    current_a: float
    junction_c: float
    low_v: float
    high_v: float


@dataclass(frozen=True, slots=True)
class Readings:
    """Windows to print on the sheet. Currents are magnitudes, all strings together."""

    night_a: tuple[float, float]
    bare_a: tuple[float, float] | None
    by_day: tuple[DropReading, ...]


def of(job: Job, study: Study) -> Readings | None:
    """Expected readings of the choice; None where nothing is chosen."""
    if study.verdict.choice is None:
        return None
    choice = study.candidate(study.verdict.choice)
    currents = (*choice.dark_typical.night_a, *choice.dark_maximum.night_a)
    bare = next((item for item in study.candidates if item.part is None and item.key == "none"), None)
    return Readings(
        (min(currents), max(currents)),
        (min(bare.dark_typical.night_a), max(bare.dark_typical.night_a)) if bare else None,
        _by_day(job, choice),
    )


def _by_day(job: Job, choice: Candidate) -> tuple[DropReading, ...]:
    if choice.part is None:
        return ()
    legs = 2 if job.legs == "both" and choice.part.dies > 1 else 1
    strings = job.array.strings if job.placement == "array" else 1
    cells = DiodeCells.of([choice.part.typical, choice.part.maximum], [legs, legs])
    found = []
    for share in DAY_SHARES:
        amps = share * job.array.label.imp_a * strings
        junction_c = READING_AIR_C
        for _ in range(8):  # the drop hardly moves with temperature, so a few rounds settle it
            drops = forward_drop_v(cells, np.array([[amps]]), np.array([[junction_c]]))[0]
            junction_c = READING_AIR_C + min((choice.rth_c_per_w or 0.0) * amps * float(np.mean(drops)), 100.0)
        low, high = float(min(drops)), float(max(drops))
        if math.isfinite(low) and math.isfinite(high):
            found.append(DropReading(amps, junction_c, low * (1 - METER_FRAC), high * (1 + METER_FRAC)))
    return tuple(found)
