"""Fitted diode -> current at a junction voltage, either direction."""

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from server.errors import InputError

FloatArray = NDArray[np.float64]

BOLTZMANN_EV_PER_K = 8.617333262e-5  # CODATA 2018, k/q
ZERO_C_K = 273.15
T0_K = 298.15  # all laws are anchored at 25 °C

# Below this reverse voltage the leakage power law is rounded off, so that it leaves 0 V with no slope of its own.
LEAKAGE_ROUNDING_V = 0.1
# In reverse the saturation current supplies no more of the leakage than the voltage law gives at this voltage.
SATURATED_BELOW_V = 1.0
# Current at which a regulated active rectifier has built up half its regulated drop.
ACTIVE_KNEE_A = 1e-3


def thermal_voltage_v(junction_c: FloatArray | float) -> FloatArray:
    """kT/q. Shape of `junction_c`."""
    return np.asarray(BOLTZMANN_EV_PER_K * (np.asarray(junction_c, dtype=np.float64) + ZERO_C_K))


def arrhenius_ratio(junction_c: FloatArray | float, energy_ev: FloatArray | float) -> FloatArray:
    """Growth from 25 °C of a quantity with activation energy `energy_ev`. Shapes broadcast."""
    t_k = np.asarray(junction_c, dtype=np.float64) + ZERO_C_K
    return np.exp(np.asarray(energy_ev) / BOLTZMANN_EV_PER_K * (1.0 / T0_K - 1.0 / t_k))


@dataclass(frozen=True, slots=True)
class JunctionLaw:
    """A junction diode (pn, Schottky, trench, super-barrier, SiC), one corner of its spread.

    Forward:  I = Is(T)·(exp(v/nVt) − 1), with `series_ohm` outside the junction;
              Is(T) = Is·(T/T0)^(X/n)·exp(−φ/(n·k)·(1/T − 1/T0)).
    Reverse:  I = −[S·(1 − exp(−u/w)) + (IR(T) − S)·q(u)], u = −v, where q is a power of u that is 1 at `leakage_ref_v`
              and leaves 0 V flat, and IR(T) follows Arrhenius. S is Is(T), but no more than IR·q(1 V): the forward fit
              may ask for a larger Is than the part leaks, for the two come from different measurements. The width
              w = nVt·S/Is gives both branches the slope Is/nVt at 0 V: the current is smooth and monotone through zero.

    Source:   thermionic emission and Shockley diffusion share this form (Sze, Physics of Semiconductor Devices, from
              memory); X = 2 for a Schottky barrier (A*T²), 3 for a pn junction.
    """

    saturation_a: float
    ideality: float
    barrier_ev: float
    temperature_power: float
    series_ohm: float
    series_ohm_per_k: float
    leakage_a: float
    leakage_ref_v: float
    leakage_exponent: float
    leakage_ev: float

    def __post_init__(self) -> None:
        """Refuse what is not a diode."""
        for field, low, high in (
            ("saturation_a", 1e-40, 10.0),
            ("ideality", 0.5, 10.0),
            ("barrier_ev", 0.0, 5.0),
            ("temperature_power", 0.0, 6.0),
            ("series_ohm", 0.0, 1e3),
            ("series_ohm_per_k", -1.0, 1.0),
            ("leakage_a", 1e-18, 10.0),
            ("leakage_ref_v", 0.1, 1e5),
            ("leakage_exponent", 0.05, 6.0),
            ("leakage_ev", 0.0, 2.0),
        ):
            value = getattr(self, field)
            if not low <= value <= high:
                raise InputError(field, f"{value:g} is outside {low:g} to {high:g}")


@dataclass(frozen=True, slots=True)
class ActiveLaw:
    """An active rectifier: a MOSFET held at a small regulated drop, then fully on; off in reverse.

    Forward:  v = regulated_v·I/(I + 1 mA) until the channel is fully on, then v = RDS(on)·I.
    Reverse:  drain leakage with the same power and Arrhenius form as a junction. The reverse turn-off threshold is
              not in the law: at rest the switch is off; `turnoff_v` serves the caution about slow reversal.
    `supply_a` is drawn from the bank day and night and is charged to the candidate's ledger, not to the loop.
    """

    regulated_v: float
    rds_on_ohm: float
    rds_on_per_k: float
    leakage_a: float
    leakage_ref_v: float
    leakage_exponent: float
    leakage_ev: float
    supply_a: float
    turnoff_v: float

    def __post_init__(self) -> None:
        """Refuse what is not an active rectifier."""
        for field, low, high in (
            ("regulated_v", 1e-4, 1.0),
            ("rds_on_ohm", 1e-6, 10.0),
            ("rds_on_per_k", 0.0, 0.05),
            ("leakage_a", 0.0, 1.0),
            ("leakage_ref_v", 0.1, 1e5),
            ("leakage_exponent", 0.05, 6.0),
            ("leakage_ev", 0.0, 2.0),
            ("supply_a", 0.0, 1.0),
            ("turnoff_v", -1.0, 0.0),
        ):
            value = getattr(self, field)
            if not low <= value <= high:
                raise InputError(field, f"{value:g} is outside {low:g} to {high:g}")


@dataclass(frozen=True, slots=True)
class NoDiode:
    """A plain wire: no drop by day, nothing blocked by night."""


@dataclass(frozen=True, slots=True)
class PerfectValve:
    """No drop by day, nothing through by night: the bound that every part is measured against."""


DiodeLaw = JunctionLaw | ActiveLaw | NoDiode | PerfectValve


@dataclass(frozen=True, slots=True, eq=False)
class DiodeCells:
    """Many diodes of one family as arrays that broadcast against each other, one column per diode and corner.

    `active` columns carry an ActiveLaw (regulated_v, rds_on), the others a JunctionLaw. `blocks` is False for a plain
    wire, and `ideal` marks the two references without drop. All arrays have the shape [D].
    """

    ideal: NDArray[np.bool_]
    blocks: NDArray[np.bool_]
    active: NDArray[np.bool_]
    saturation_a: FloatArray
    ideality: FloatArray
    barrier_ev: FloatArray
    temperature_power: FloatArray
    series_ohm: FloatArray
    series_ohm_per_k: FloatArray
    leakage_a: FloatArray
    leakage_ref_v: FloatArray
    leakage_exponent: FloatArray
    leakage_ev: FloatArray
    regulated_v: FloatArray

    @classmethod
    def of(cls, laws: Sequence[DiodeLaw], legs: Sequence[int] | None = None, carries_strings: int = 1) -> "DiodeCells":
        """Columns for `laws`, as seen by ONE string.

        `legs[i]` dies in parallel share one temperature: current and leakage add. With `carries_strings` = N one diode
        serves N equal strings: a string sees 1/N of its current at a given voltage, that is N times its resistance.
        """
        scale = np.array([1.0] * len(laws) if legs is None else legs, dtype=np.float64) / carries_strings

        def column(name: str, missing: float) -> FloatArray:
            return np.array([float(getattr(law, name, missing)) for law in laws], dtype=np.float64)

        active = np.array([isinstance(law, ActiveLaw) for law in laws])
        ohm = np.where(active, column("rds_on_ohm", 0.0), column("series_ohm", 0.0))
        rds_per_k = column("rds_on_per_k", 0.0) * column("rds_on_ohm", 0.0)
        ohm_per_k = np.where(active, rds_per_k, column("series_ohm_per_k", 0.0))
        return cls(
            ideal=np.array([isinstance(law, NoDiode | PerfectValve) for law in laws]),
            blocks=np.array([not isinstance(law, NoDiode) for law in laws]),
            active=active,
            saturation_a=column("saturation_a", 1.0) * scale,
            ideality=column("ideality", 1.0),
            barrier_ev=column("barrier_ev", 0.0),
            temperature_power=column("temperature_power", 0.0),
            series_ohm=ohm / scale,
            series_ohm_per_k=ohm_per_k / scale,
            leakage_a=column("leakage_a", 0.0) * scale,
            leakage_ref_v=column("leakage_ref_v", 1.0),
            leakage_exponent=column("leakage_exponent", 1.0),
            leakage_ev=column("leakage_ev", 0.0),
            regulated_v=column("regulated_v", 0.0),
        )

    def take(self, columns: NDArray[np.intp] | slice) -> "DiodeCells":
        """The same record for some columns only."""
        return DiodeCells(*(getattr(self, name)[columns] for name in self.__slots__))

    def column(self) -> "DiodeCells":
        """The same record as [D, 1], to broadcast against time as the fast axis."""
        return DiodeCells(*(getattr(self, name)[:, None] for name in self.__slots__))

    def flat(self) -> "DiodeCells":
        """The record of `column()` as [D] again."""
        return DiodeCells(*(getattr(self, name).reshape(-1) for name in self.__slots__))

    def __len__(self) -> int:
        """How many columns."""
        return len(self.ideality)


def saturation_a(cells: DiodeCells, junction_c: FloatArray) -> FloatArray:
    """Forward saturation current at `junction_c`. Shapes broadcast with [D]."""
    t_k = np.asarray(junction_c, dtype=np.float64) + ZERO_C_K
    log_ratio = cells.temperature_power / cells.ideality * np.log(t_k / T0_K)
    log_ratio = log_ratio + cells.barrier_ev / (cells.ideality * BOLTZMANN_EV_PER_K) * (1.0 / T0_K - 1.0 / t_k)
    return np.asarray(cells.saturation_a * np.exp(log_ratio))


def series_ohm(cells: DiodeCells, junction_c: FloatArray) -> FloatArray:
    """Series (or channel) resistance at `junction_c`, never below a twentieth of its value at 25 °C."""
    ohm = cells.series_ohm + cells.series_ohm_per_k * (np.asarray(junction_c, dtype=np.float64) - 25.0)
    return np.asarray(np.maximum(ohm, 0.05 * cells.series_ohm))


def leakage_shape(reverse_v: FloatArray, ref_v: FloatArray, exponent: FloatArray) -> tuple[FloatArray, FloatArray]:
    """q(u), 1 at `ref_v`, 0 and flat at 0 V, close to (u/ref)^m above a volt; and its slope dq/du."""
    c2 = LEAKAGE_ROUNDING_V**2
    half = 0.5 * exponent
    base = reverse_v * reverse_v + c2
    floor = c2**half
    top = (ref_v * ref_v + c2) ** half - floor
    power = base**half
    return (power - floor) / top, exponent * reverse_v * power / (base * top)


def reverse_a(cells: DiodeCells, reverse_v: FloatArray, junction_c: FloatArray) -> FloatArray:
    """Leakage magnitude at `reverse_v` >= 0 across the part and `junction_c`. Shapes broadcast with [D]."""
    total, _ = reverse_a_and_slope(cells, reverse_v, junction_c)
    return total


def reverse_a_and_slope(
    cells: DiodeCells, reverse_v: FloatArray, junction_c: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Leakage magnitude, and its slope with `reverse_v`, in A and A/V. Shapes broadcast with [D]."""
    law = ReverseLaw.at(cells, junction_c)
    return law.current_and_slope(np.asarray(reverse_v, dtype=np.float64))


@dataclass(frozen=True, slots=True, eq=False)
class ReverseLaw:
    """Leakage at one temperature per cell, its temperature factors worked out once for many voltages."""

    saturated_a: FloatArray
    width_v: FloatArray
    rest_a: FloatArray
    ref_v: FloatArray
    exponent: FloatArray

    @classmethod
    def at(cls, cells: DiodeCells, junction_c: FloatArray) -> "ReverseLaw":
        """The laws of `cells` at `junction_c`; shapes broadcast."""
        leakage = cells.leakage_a * arrhenius_ratio(junction_c, cells.leakage_ev)
        most, _ = leakage_shape(np.array(SATURATED_BELOW_V), cells.leakage_ref_v, cells.leakage_exponent)
        is_a = saturation_a(cells, junction_c)
        saturated = np.where(cells.active | cells.ideal, 0.0, np.minimum(is_a, np.minimum(most, 0.5) * leakage))
        width = cells.ideality * thermal_voltage_v(junction_c) * np.where(saturated > 0, saturated / is_a, 1.0)
        width = np.maximum(width, 1e-12)
        return cls(saturated, width, leakage - saturated, cells.leakage_ref_v, cells.leakage_exponent)

    def current_and_slope(self, u: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Leakage magnitude at reverse voltage `u`, and its slope."""
        shape, shape_slope = leakage_shape(u, self.ref_v, self.exponent)
        decay = np.exp(-np.minimum(u / self.width_v, 700.0))
        total = self.saturated_a * (1.0 - decay) + self.rest_a * shape
        return total, self.saturated_a / self.width_v * decay + self.rest_a * shape_slope


def forward_drop_v(cells: DiodeCells, current_a: FloatArray, junction_c: FloatArray) -> FloatArray:
    """Voltage across the whole part at a forward current >= 0, series resistance included. Broadcasts with [D]."""
    i = np.asarray(current_a, dtype=np.float64)
    ohm = series_ohm(cells, junction_c)
    n_vt = cells.ideality * thermal_voltage_v(junction_c)
    junction_v = n_vt * np.log1p(i / saturation_a(cells, junction_c)) + i * ohm
    active_v = np.maximum(cells.regulated_v * i / (i + ACTIVE_KNEE_A), i * ohm)
    return np.where(cells.ideal, 0.0, np.where(cells.active, active_v, junction_v))


def current_a(cells: DiodeCells, junction_v: FloatArray, junction_c: FloatArray) -> FloatArray:
    """Current at a junction voltage, either direction, outside `series_ohm` for junction diodes.

    For an active rectifier the voltage is across the whole part. The references have no such law (any current at 0 V)
    and give NaN. Shapes broadcast with [D].
    """
    v = np.asarray(junction_v, dtype=np.float64)
    n_vt = cells.ideality * thermal_voltage_v(junction_c)
    forward = saturation_a(cells, junction_c) * np.expm1(np.clip(v / n_vt, 0.0, 700.0))
    ohm = series_ohm(cells, junction_c)
    below = np.clip(v, 0.0, np.maximum(cells.regulated_v * (1 - 1e-12), 0.0))
    knee = ACTIVE_KNEE_A * below / np.maximum(cells.regulated_v - below, 1e-300)
    with np.errstate(divide="ignore", invalid="ignore"):
        full_on = np.where(ohm > 0, np.maximum(v, 0.0) / ohm, np.inf)
    # V = max(a, b) of two rising functions of I inverts to the smaller of the two currents.
    switch = np.where(v < cells.regulated_v, np.minimum(knee, full_on), full_on)
    forward = np.where(cells.active, switch, forward)
    backward = -reverse_a(cells, np.maximum(-v, 0.0), junction_c)
    return np.where(cells.ideal, np.nan, np.where(v >= 0, forward, backward))


def scaled(law: JunctionLaw, *, leakage: float = 1.0, drop_v: float = 0.0) -> JunctionLaw:
    """The same law with its leakage multiplied and its forward drop shifted by `drop_v` at 25 °C."""
    shift = float(np.exp(-drop_v / (law.ideality * BOLTZMANN_EV_PER_K * T0_K)))
    return replace(law, leakage_a=law.leakage_a * leakage, saturation_a=law.saturation_a * shift)
