"""The part in hand: a few multimeter readings refit one catalogue type and shrink its band."""

import math
from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from server.catalog.part import Part
from server.errors import InputError
from server.physics import diode as dio
from server.physics.diode import BOLTZMANN_EV_PER_K, T0_K, ZERO_C_K, DiodeCells, JunctionLaw

MOST_READINGS = 8
MOST_SHIFT_V = 0.30  # a forward drop further off than this is another part, or a meter's diode range
MOST_LEAKAGE_RATIO = 1e4
TELLING_HEAT_C = 10.0  # two leakage readings closer than this in temperature say nothing of its growth
ENERGY_EV = (0.2, 1.3)
# What a hand-held meter, a thermometer on the lead and a warming junction leave open (engineering estimate).
METER_V, METER_LEAKAGE = 0.01, 1.25


@dataclass(frozen=True, slots=True)
class ForwardReading:
    """Volts across the part at a steady current, and about the temperature of its body."""

    current_a: float
    voltage_v: float
    junction_c: float


@dataclass(frozen=True, slots=True)
class ReverseReading:
    """Current through the part at a reverse voltage, a magnitude, and about the temperature of its body."""

    reverse_v: float
    current_a: float
    junction_c: float


def through_voltmeter(bank_v: float, meter_v: float, meter_ohm: float, junction_c: float) -> ReverseReading:
    """A voltmeter in series is a shunt: its reading over its resistance is the current, the rest lies on the diode."""
    if not 0 < meter_v < bank_v:
        raise InputError("meter_v", f"{meter_v:g} V must lie above 0 and below the bank's {bank_v:g} V")
    if not 1e3 <= meter_ohm <= 1e12:
        raise InputError("meter_ohm", f"{meter_ohm:g} ohm is outside 1000 to 1e12 ohm")
    return ReverseReading(bank_v - meter_v, meter_v / meter_ohm, junction_c)


def refit(part: Part, forward: Sequence[ForwardReading], reverse: Sequence[ReverseReading]) -> Part:
    """`part` as measured: its shape kept, its drop and its leakage moved through the readings.

    One forward reading shifts the drop; two or more at different currents also change the resistance. One leakage
    reading scales the leakage; two or more at temperatures 10 °C apart also set its growth. Typical is what was
    measured, maximum what the meter leaves open. What was not measured keeps the sheet's corners.

    Raises:  InputError where a reading cannot be of this part, or there is none.
    """
    if not isinstance(part.typical, JunctionLaw) or not isinstance(part.maximum, JunctionLaw):
        raise InputError("type", f"{part.type} is an active rectifier; readings refit junction diodes only")
    if not forward and not reverse:
        raise InputError("forward", "no reading is given; one of the drop or of the leakage is the least")
    if len(forward) + len(reverse) > MOST_READINGS:
        raise InputError(
            "forward", f"{len(forward) + len(reverse)} readings are given; at most {MOST_READINGS} are taken"
        )
    typical, maximum = part.typical, part.maximum
    said = []
    if forward:
        shift_v, more_ohm = _forward_shift(part.typical, forward)
        typical = replace(typical, series_ohm=max(typical.series_ohm + more_ohm, 0.0))
        typical = dio.scaled(typical, drop_v=shift_v)
        maximum = dio.scaled(replace(typical, **_leakage_of(maximum)), drop_v=METER_V)
        said.append(f"forward drop measured at {len(forward)} current{'s' if len(forward) > 1 else ''}")
    if reverse:
        for _ in range(
            3
        ):  # the first volt's share of the leakage follows the drop, so the shape settles in a few rounds
            ratio, energy_ev = _leakage_change(typical, reverse)
            typical = replace(typical, leakage_a=typical.leakage_a * ratio, leakage_ev=energy_ev)
        maximum = replace(maximum, leakage_a=typical.leakage_a * METER_LEAKAGE, leakage_ev=typical.leakage_ev)
        maximum = replace(maximum, leakage_exponent=typical.leakage_exponent, leakage_ref_v=typical.leakage_ref_v)
        said.append(f"leakage measured {len(reverse)} time{'s' if len(reverse) > 1 else ''}")
    return replace(
        part,
        type=f"{part.type} in hand",
        typical=typical,
        maximum=maximum,
        fit=None,
        assumed=("; ".join(said), "what was not measured keeps the sheets' values", *part.assumed),
        note="part in hand; the sheets' maximum stays the case for buying another",
    )


def _leakage_of(law: JunctionLaw) -> dict[str, float]:
    return {name: getattr(law, name) for name in ("leakage_a", "leakage_ref_v", "leakage_exponent", "leakage_ev")}


def _bounded(field: str, value: float, low: float, high: float, unit: str) -> None:
    if not low <= value <= high:
        raise InputError(field, f"{value:g} {unit} is outside {low:g} to {high:g} {unit}")


def _forward_shift(law: JunctionLaw, readings: Sequence[ForwardReading]) -> tuple[float, float]:
    """Volts to add at any current, and ohms to add to the series resistance, by least squares."""
    cells = DiodeCells.of([law])
    for reading in readings:
        _bounded("forward", reading.current_a, 1e-6, 1e4, "A")
        _bounded("forward", reading.voltage_v, 0.01, 5.0, "V")
        _bounded("forward", reading.junction_c, -60.0, 200.0, "°C")
    amps = np.array([r.current_a for r in readings])
    ours = np.array(
        [float(dio.forward_drop_v(cells, np.array([r.current_a]), np.array([r.junction_c]))[0]) for r in readings]
    )
    off = np.array([r.voltage_v for r in readings]) - ours
    shift, ohm = float(off.mean()), 0.0
    if len(readings) > 1 and amps.max() > 1.5 * amps.min():
        (ohm, shift), *_ = np.linalg.lstsq(np.stack([amps, np.ones_like(amps)], axis=1), off, rcond=None)
        if law.series_ohm + ohm < 0:  # no resistance is left to take away: the rest is a shift
            ohm = -law.series_ohm
            shift = float((off - ohm * amps).mean())
    if abs(shift) > MOST_SHIFT_V:
        raise InputError(
            "forward",
            f"the readings lie {shift:+.2f} V off this type's drop, more than {MOST_SHIFT_V:g} V; it is another part, "
            "or the meter's diode range was read, which drives about 1 mA",
        )
    return float(shift), float(ohm)


def _leakage_change(law: JunctionLaw, readings: Sequence[ReverseReading]) -> tuple[float, float]:
    """Factor on the leakage at 25 °C, and its activation energy, by least squares in the logarithm."""
    cells = DiodeCells.of([law])
    for reading in readings:
        _bounded("reverse", reading.reverse_v, 0.5, 1e4, "V")
        _bounded("reverse", reading.current_a, 1e-12, 10.0, "A")
        _bounded("reverse", reading.junction_c, -60.0, 200.0, "°C")
    ours = np.array(
        [float(dio.reverse_a(cells, np.array([r.reverse_v]), np.array([r.junction_c]))[0]) for r in readings]
    )
    logs = np.log(np.array([r.current_a for r in readings]) / ours)
    temps = np.array([r.junction_c for r in readings])
    energy, offset = law.leakage_ev, float(logs.mean())
    if np.ptp(temps) >= TELLING_HEAT_C:
        x = (1.0 / T0_K - 1.0 / (temps + ZERO_C_K)) / BOLTZMANN_EV_PER_K
        (slope, _), *_ = np.linalg.lstsq(np.stack([x, np.ones_like(x)], axis=1), logs, rcond=None)
        energy = float(np.clip(law.leakage_ev + slope, *ENERGY_EV))
        offset = float((logs - (energy - law.leakage_ev) * x).mean())
    if abs(offset) > math.log(MOST_LEAKAGE_RATIO):
        raise InputError(
            "reverse",
            f"the readings are {math.exp(offset):.2g} times this type's leakage, outside 1/{MOST_LEAKAGE_RATIO:g} to "
            f"{MOST_LEAKAGE_RATIO:g}; it is another part, or the unit is off",
        )
    return math.exp(offset), energy
