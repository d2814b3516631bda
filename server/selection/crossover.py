"""The night temperature at which a low-drop part's leakage eats what its drop saves by day."""

import numpy as np
from numpy.typing import NDArray

from server.physics.circuit import LoopInput, solve
from server.physics.diode import DiodeCells
from server.physics.pv import StringSpec
from server.selection.figures import figure
from server.selection.job import Job
from server.selection.result import Candidate, Crossover, SiteFacts

FloatArray = NDArray[np.float64]

COLDEST_C, HOTTEST_C = -40.0, 90.0  # nights outside this are not asked about
RIVAL = "pn_silicon"  # the technology that leaks least and drops most


def break_even_leakage_a(drop_saved_v: float, charge_ah: float, bank_v: float, dark_h: float) -> float:
    """Leakage by night that costs as much energy as a smaller drop saves by day, where all of the drop is lost."""
    return drop_saved_v * charge_ah / (bank_v * dark_h)


def crossover(
    job: Job, spec: StringSpec, shunt_ohm: float, facts: SiteFacts, choice: Candidate, candidates: list[Candidate]
) -> Crossover | None:
    """Where the best silicon diode that may be fitted overtakes the choice, the deciding period's days as they are.

    None where the choice is itself one, or no part, or none of them may be fitted. Night and junction are taken at one
    temperature; the string's own dark current is in it.
    """
    rival = next((item for item in candidates if item.rank is not None and item.technology == RIVAL), None)
    if choice.part is None or rival is None or rival.part is None or choice.technology in (RIVAL, "active"):
        return None
    period = facts.deciding_period
    temps = np.linspace(COLDEST_C, HOTTEST_C, 131)
    carried = job.array.strings if job.placement == "array" else 1
    legs = [part.parallel_legs if job.legs == "both" else 1 for part in (choice.part, rival.part)] * 2
    laws = [choice.part.typical, rival.part.typical, choice.part.maximum, rival.part.maximum]
    dark = spec.cells(np.zeros_like(temps), temps, shunt_ohm)
    ohm = job.loop_ohm * job.array.strings
    state = solve(LoopInput(dark, DiodeCells.of(laws, legs, carried), facts.night_v, ohm, temps, 0.0))
    drain_ah = -state.current_a * job.array.strings * facts.dark_hours[period]
    found = []
    for column, (ours, theirs) in enumerate(((choice.typical, rival.typical), (choice.maximum, rival.maximum))):
        saved_ah = theirs.day_loss_ah[period] - ours.day_loss_ah[period]
        found.append(_rises_through(temps, drain_ah[:, 2 * column] - drain_ah[:, 2 * column + 1], saved_ah))
    typical, maximum = found
    return Crossover(rival.key, rival.title, typical, maximum, _words(rival.title, typical, maximum))


def _rises_through(temps_c: FloatArray, extra_ah: FloatArray, saved_ah: float) -> float | None:
    """Temperature where the extra drain first reaches what is saved; the coldest if it already has, None if never."""
    over = np.flatnonzero(extra_ah >= saved_ah)
    if not over.size:
        return None
    first = int(over[0])
    if first == 0:
        return float(temps_c[0])
    below, above = extra_ah[first - 1], extra_ah[first]
    return float(np.interp(saved_ah, [below, above], temps_c[first - 1 : first + 1]))


def _words(rival: str, typical: float | None, maximum: float | None) -> str:
    if typical is None and maximum is None:
        return f"up to nights of {HOTTEST_C:.0f} °C its leakage never eats what it saves by day against {rival}"

    def nights(value: float | None) -> str:
        if value is None:
            return f"never up to nights of {HOTTEST_C:.0f} °C"
        return f"on nights warmer than about {figure(round(value), 3)} °C" if value > COLDEST_C else "on any night"

    return f"{rival} overtakes it {nights(typical)} with typical parts, {nights(maximum)} with maximum ones"
