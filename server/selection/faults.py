"""What flows when something fails: a shorted string or module, a shaded string, a reversed bank, a shorted diode.

A blocking diode is not overcurrent protection. This study says what it does and what it does not: the current into the
faulty string with and without diodes, from the same loop solved with that string's own curve.
"""

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from server.physics.circuit import LoopInput, solve
from server.physics.diode import DiodeCells, DiodeLaw, NoDiode
from server.physics.pv import StringCells, StringSpec
from server.selection.figures import figure, milli
from server.selection.heating import Worst
from server.selection.job import Job
from server.selection.ratings import ISC_MAX_FACTOR, controller_lets_back, fault_current_a
from server.selection.result import Bus, Candidate, FaultCase, FaultStudy, Outcome, SecondSource, SiteFacts

FloatArray = NDArray[np.float64]

LIGHT_W_M2 = 1000.0 * ISC_MAX_FACTOR  # Isc,max = 1.25 × Isc
CELL_C = 25.0  # the coolest lit cells hold the most voltage, so they push the most
SHADE_W_M2 = 100.0  # diffuse light on a shaded string
# Fuse window over Isc, the lowest floor and the highest ceiling of codes and manuals: 1.4 (textbook) to 2.4 (manuals).
FUSE_FLOOR, FUSE_CEILING = 1.4, 2.4


def _battery_fuse_words(job: Job) -> str:
    """Where the bank's own fuse goes: the unearthed conductor, at the end that can feed the most."""
    pole = {
        "negative": "in the positive conductor",
        "positive": "in the negative conductor",
        "floating": "in both poles",
    }
    return (
        "the bank is the stronger source, so its fuse sits within reach of its terminal, at the battery end of the "
        f"cable, {pole[job.earthing]}" + ("" if job.earthing == "floating" else ", the one that is not earthed")
    )


@dataclass(frozen=True, slots=True)
class _Place:
    """What every case starts from."""

    job: Job
    spec: StringSpec
    shunt_ohm: float
    box_c: float
    choice: Candidate | None

    @property
    def fitted(self) -> bool:
        return self.choice is not None and self.choice.part is not None

    @property
    def others(self) -> int:
        return self.job.array.strings - 1

    @property
    def ohm(self) -> float:
        """The shared cable: between array and bank."""
        return self.job.loop_ohm + self.job.bank.internal_ohm

    def lit(self, light: float = LIGHT_W_M2, modules: int | None = None) -> StringCells:
        """One string's law under the fault's light; `modules` of it still alive."""
        s = self.spec
        n = s.modules_in_series if modules is None else modules
        alive = StringSpec(s.module, s.cells_per_module, s.isc_a, n, s.soiling_frac, s.mismatch_frac)
        return alive.cells(np.array([light]), np.array([CELL_C]), self.shunt_ohm)

    def laws(self) -> DiodeCells:
        """No diode, then the chosen part typical and maximum (or no diode again)."""
        if self.choice is None or self.choice.part is None:
            return DiodeCells.of([NoDiode(), NoDiode(), NoDiode()])
        part = self.choice.part
        legs = part.parallel_legs if self.job.legs == "both" else 1
        return DiodeCells.of([NoDiode(), part.typical, part.maximum], [1, legs, legs])


def fault_study(
    job: Job, spec: StringSpec, shunt_ohm: float, box_c: float, choice: Candidate | None, none: Candidate
) -> FaultStudy:
    """Every fault that this array can have.

    spec, shunt_ohm: the healthy string and one module's dark shunt. box_c: hottest air around the diode, where it leaks
    most. choice: the candidate fitted, None for none. none: the candidate without a diode.
    """
    place = _Place(job, spec, shunt_ohm, box_c, choice)
    # Behind a controller that lets nothing back, the bank feeds no fault of the array.
    banks = (True, False) if controller_lets_back(job) else (False,)
    cases = [_shorted_string(place, bank=bank) for bank in banks]
    if job.array.modules_in_series > 1:
        faulty = place.lit(modules=spec.modules_in_series - 1)
        cases += [_weak_string(place, "module_shorted", "One module shorted", faulty, bank=bank) for bank in banks]
    if job.array.strings > 1:
        faulty = place.lit(SHADE_W_M2)
        cases += [_weak_string(place, "string_shaded", "One string in shade", faulty, bank=bank) for bank in banks]
    cases.append(_reversed_bank(place))
    if place.fitted:
        cases.append(_shorted_diode(none, job.array.strings))
    isc = job.array.label.isc_a
    rating = job.array.max_series_fuse_a
    ceiling = FUSE_CEILING * isc if rating is None else min(FUSE_CEILING * isc, rating)
    window = (FUSE_FLOOR * isc, ceiling)
    text = (
        f"a string fuse lies between {window[0]:.1f} and {window[1]:.1f} A: {FUSE_FLOOR:g} to {FUSE_CEILING:g} × Isc, "
        "the widest range of the texts read (1.4 to 2 × in a textbook, 1.5, 1.56 or 1.8 × up to 2 or 2.4 × in manuals)"
        + ("" if rating is None else f", and not above the module's {rating:g} A")
    )
    if window[0] > window[1]:
        text += "; here the floor lies above the module's rating, so the label and the code must be read again"
    return FaultStudy(
        tuple(cases),
        window,
        text,
        _battery_fuse_words(job),
        "A blocking diode is not overcurrent protection: it usually fails short, and then every figure without a diode "
        "holds.",
    )


def _dead(spec: StringSpec) -> StringCells:
    """A string shorted at its terminals: no source, next to no resistance."""
    one = np.ones(1)
    return StringCells(0.0 * one, 1e-30 * one, one * spec.module.slope_v, 1e9 * one, 0.0 * one)


def into_fault_a(faulty: StringCells, laws: DiodeCells, bus_v: float, ohm: float, box_c: float = CELL_C) -> FloatArray:
    """Current from a stiff bus into a faulty string through each diode, a magnitude; 0 where the string still gives."""
    state = solve(LoopInput(faulty, laws, bus_v, ohm, box_c, 0.0))
    return np.asarray(np.maximum(-state.current_a[0], 0.0))


def balance_v(healthy: StringCells, count: int, faulty: StringCells, ohm: float) -> float:
    """Bus voltage at which `count` healthy strings push just what the faulty one takes, all without diodes, no bank.

    Each string sees `ohm` of its own. The offer falls and the take rises with bus voltage: halving finds the point.
    """
    plain = DiodeCells.of([NoDiode()])

    def surplus_a(bus_v: float) -> float:
        offered = solve(LoopInput(healthy, plain, bus_v, ohm, CELL_C, 0.0)).current_a[0, 0]
        taken = solve(LoopInput(faulty, plain, bus_v, ohm, CELL_C, 0.0)).current_a[0, 0]
        return float(count * offered + taken)

    low, high = 0.0, float(healthy.open_circuit_v()[0])
    for _ in range(60):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if surplus_a(middle) > 0 else (low, middle)
    return 0.5 * (low + high)


def _allowed_a(job: Job) -> float | None:
    limits = [x for x in (job.array.max_series_fuse_a, job.array.cable_ampacity_a) if x is not None]
    return min(limits) if limits else None


def _judged(current_a: float | None, allowed_a: float | None) -> Outcome:
    if current_a is None:
        return "fail"
    if allowed_a is None:
        return "info"
    return "fail" if current_a > allowed_a else "pass"


def _case(
    place: _Place, code: str, title: str, *, bank: bool, bare_a: float | None, diode_a: FloatArray, sentence: str
) -> FaultCase:
    """One case; `diode_a` is what `into_fault_a` gave for `place.laws()`.

    One diode for the whole array stands between array and bank, not between strings: it keeps the bank out of a fault,
    and the other strings still feed it.
    """
    typical, maximum = (float(diode_a[1]), float(diode_a[2])) if place.fitted else (None, None)
    if place.fitted and place.job.placement == "array" and place.others:
        fed_a = fault_current_a(place.job.array.strings, place.job.array.label.isc_a)
        typical = maximum = fed_a if bare_a is None else min(fed_a, bare_a)
        sentence += "; the one diode of the array does not stand between strings"
    allowed = _allowed_a(place.job)
    met = maximum if place.fitted else bare_a
    bus: Bus = "bank connected" if bank else "bank disconnected"
    return FaultCase(code, title, bus, bare_a, typical, maximum, allowed, _judged(met, allowed), sentence)


def _through_cable_a(place: _Place) -> float | None:
    """What the bank drives through the cable alone; None where the cable is not told, or holds nothing back."""
    return None if place.ohm < 1e-6 else place.job.bank.full_v / place.ohm


def _shorted_string(place: _Place, *, bank: bool) -> FaultCase:
    """The string's cable or all of its modules shorted, on the array's side of the diode."""
    job, others = place.job, place.others
    if bank:
        bare = _through_cable_a(place)
        diode_a = into_fault_a(_dead(place.spec), place.laws(), job.bank.full_v, place.ohm, place.box_c)
        text = "without a diode the bank feeds the short, held by nothing but cable and fuse"
        text += "" if bare is None else f": some {figure(bare, 3)} A through {place.ohm:.3f} ohm"
        text += "; with a sound diode only its leakage flows"
    else:
        bare = fault_current_a(job.array.strings, job.array.label.isc_a)
        healthy_v = float(place.lit().open_circuit_v()[0])
        diode_a = np.zeros(3)
        text = "there is no other string to feed it"
        if others:
            diode_a = into_fault_a(_dead(place.spec), place.laws(), healthy_v, 0.0, place.box_c)
            they = "1 healthy string pushes" if others == 1 else f"{others} healthy strings push"
            text = f"{they} {bare:.1f} A into it at 1.25 × Isc; with a sound diode in each string only leakage flows"
    return _case(place, "string_shorted", "One string shorted", bank=bank, bare_a=bare, diode_a=diode_a, sentence=text)


def _weak_string(place: _Place, code: str, title: str, faulty: StringCells, *, bank: bool) -> FaultCase:
    """A string with one module shorted, or in the shade: it still holds a voltage of its own."""
    healthy, others = place.lit(), place.others
    own_v = float(faulty.open_circuit_v()[0])
    if bank:
        bus_v, source, ohm = place.job.bank.full_v, "the bank", place.ohm
    elif others:
        bus_v, source, ohm = balance_v(healthy, others, faulty, 0.0), "what the others hold it at", 0.0
    else:
        bus_v, source, ohm = 0.0, "nothing", 0.0
    bare = float(into_fault_a(faulty, DiodeCells.of([NoDiode()]), bus_v, ohm)[0])
    # Behind diodes the bus floats to the healthy strings' open circuit, and only leakage flows back.
    top_v = bus_v if bank or not others else float(healthy.open_circuit_v()[0])
    diode_a = into_fault_a(faulty, place.laws(), top_v, ohm, place.box_c)
    text = f"it still holds {own_v:.1f} V; " + (
        "there is no other string to feed it"
        if bus_v == 0.0
        else f"{source}, {bus_v:.1f} V, pushes {figure(bare)} A into it"
        if bare > 0
        else f"{source}, {bus_v:.1f} V, pushes nothing into it: the string still gives"
    )
    return _case(place, code, title, bank=bank, bare_a=bare, diode_a=diode_a, sentence=text)


def _reversed_bank(place: _Place) -> FaultCase:
    """The bank connected the wrong way round: it drives the bypass diodes and the series diode forward."""
    bare = _through_cable_a(place)
    text = "a reversed bank drives the modules' bypass diodes and the series diode forward: the diode limits nothing"
    text += "" if bare is None else f", some {figure(bare, 3)} A flow"
    text += " until the battery fuse opens, and bypass diodes fail short"
    title, allowed = "Battery connected in reverse", _allowed_a(place.job)
    return FaultCase("bank_reversed", title, "bank connected", bare, bare, bare, allowed, "fail", text)


def _shorted_diode(none: Candidate, strings: int) -> FaultCase:
    """The usual end of an overheated diode, and a silent one. The currents are one bare string's by night."""
    text = (
        "charging looks perfect and by night the drain of the bare string is back; every case above then stands as "
        "without a diode. Only a night reading shows it"
    )
    _, middle, high = (x / strings for x in none.dark_typical.night_a)
    return FaultCase(
        "diode_shorted", "A diode failed short", "bank connected", middle, middle, high, None, "info", text
    )


def second_source(
    job: Job, spec: StringSpec, shunt_ohm: float, facts: SiteFacts, worst: Worst, choice: Candidate | None
) -> SecondSource | None:
    """Drain of the dark array while another source holds the bank up, at the deciding period's night."""
    bus_v = job.other_source_v
    if bus_v is None:
        return None
    air = facts.night_air_c[facts.deciding_period]
    night = np.array([air if math.isfinite(air) else facts.record_low_c])
    laws: list[DiodeLaw] = [NoDiode(), NoDiode(), NoDiode()]
    legs = [1, 1, 1]
    if choice is not None and choice.part is not None:
        laws[1:] = [choice.part.typical, choice.part.maximum]
        legs[1:] = [choice.part.parallel_legs if job.legs == "both" else 1] * 2
    carried = job.array.strings if job.placement == "array" else 1
    ohm = (job.loop_ohm + job.bank.internal_ohm) * job.array.strings
    dark = spec.cells(np.zeros(1), night, shunt_ohm)
    state = solve(LoopInput(dark, DiodeCells.of(laws, legs, carried), bus_v, ohm, night, 0.0))
    bare, typical, maximum = (float(-x) * job.array.strings for x in state.current_a[0])
    text = (
        f"at {bus_v:g} V by night the bare array takes {milli(bare)}"
        + ("" if choice is None or choice.part is None else f", behind the diode {milli(typical)} to {milli(maximum)}")
        + f"; the diode may see {worst.stress_v:.1f} V. One diode per solar string; a turbine's rectifier blocks"
    )
    return SecondSource(bus_v, bare, typical, maximum, worst.stress_v, text)
