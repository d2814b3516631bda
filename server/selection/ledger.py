"""Day loss and night drain, in ampere-hours and watt-hours: the loop's cells, summed to a mean day of each period.

Two ledgers are kept apart. Heat is what the diode dissipates. The loss is what the battery misses against a perfect
valve: on the flat part of a string's curve next to nothing, behind a maximum-power converter nearly all of the heat.
"""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from server.physics.circuit import LoopState
from server.physics.climate import SiteDays
from server.physics.sky import MONTHS
from server.selection.job import Charge
from server.selection.result import Ledger

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Periods:
    """Months (or the one stated day) and the weights that turn rows of power into watt-hours of a mean day."""

    names: tuple[str, ...]
    days: FloatArray
    """[P], days of the year that each period stands for."""
    per_day_h: FloatArray
    """[P, T]: hours each row adds to its period's mean day."""
    per_year_h: FloatArray
    """[T]: hours each row adds to the year."""

    @classmethod
    def of(cls, days: SiteDays, stated: bool) -> "Periods":
        """Twelve months, or one period where the climate is a stated day."""
        months = [0] if stated else list(range(12))
        names = ("the stated day",) if stated else tuple(MONTHS)
        member = days.month[None, :] == np.array(months)[:, None]
        per_year_h = days.weight_days * days.step_h
        total = np.where(member, per_year_h, 0.0)
        length = total.sum(axis=1) / 24.0
        return cls(names, length, total / length[:, None], per_year_h)


@dataclass(frozen=True, slots=True, eq=False)
class Flows:
    """What crosses the bank's terminals in every row, all strings together. [T, D]."""

    charge_a: FloatArray
    charge_w: FloatArray
    drain_a: FloatArray
    heat_w: FloatArray
    bank_v: FloatArray
    """[T, 1]"""

    @classmethod
    def of(cls, state: LoopState, charge: Charge, bank_v: FloatArray, strings: int) -> "Flows":
        """Split by sign. A blocking controller lets nothing back; a converter hands on watts, not amperes."""
        forward_a = np.maximum(state.current_a, 0.0) * strings
        column = bank_v[:, None]
        charge_w = forward_a * state.bus_v
        if charge.controller == "mppt":
            charge_w = charge_w * charge.efficiency_frac
        drain_a = np.zeros_like(forward_a)
        if charge.blocks_at_night != "yes":
            drain_a = np.maximum(-state.current_a, 0.0) * strings
        heat_w = np.where(state.current_a > 0, state.diode_w, 0.0) * strings
        return cls(charge_w / column, charge_w, drain_a, heat_w, column)


def unlit(poa_w_m2: FloatArray) -> NDArray[np.bool_]:
    """Rows without any light."""
    return np.asarray(poa_w_m2 <= 0.0)


@dataclass(frozen=True, slots=True, eq=False)
class Sums:
    """Mean-day totals for every column: [P, D], and for the year: [D]."""

    heat_wh: FloatArray
    delivered_ah: FloatArray
    delivered_wh: FloatArray
    drain_ah: FloatArray
    drain_wh: FloatArray

    @classmethod
    def of(cls, flows: Flows, weights_h: FloatArray) -> "Sums":
        """Weighted sums over the rows. weights_h: [P, T] or [T]."""
        return cls(
            weights_h @ flows.heat_w,
            weights_h @ flows.charge_a,
            weights_h @ flows.charge_w,
            weights_h @ flows.drain_a,
            weights_h @ (flows.drain_a * flows.bank_v),
        )


def ledgers(
    day: Sums,
    year: Sums,
    full_ah: FloatArray | None,
    valve: int,
    supply_a: FloatArray,
    own_ah: FloatArray,
    own_year_ah: float,
    bank_v: float,
    year_days: float,
) -> list[Ledger]:
    """A ledger for every column. `valve` is the perfect valve's column, the measure of every loss.

    full_ah: [P, D] delivered were the bank full all day. supply_a: [D], drawn round the clock. own_ah: [P], the
    controller's own, charged to every column alike.
    """
    out = []
    for d in range(len(supply_a)):
        supply_ah = 24.0 * supply_a[d]
        loss_ah = day.delivered_ah[:, valve] - day.delivered_ah[:, d]
        loss_wh = day.delivered_wh[:, valve] - day.delivered_wh[:, d]
        full_loss = loss_ah if full_ah is None else full_ah[:, valve] - full_ah[:, d]
        drain_ah, drain_wh = day.drain_ah[:, d] + supply_ah, day.drain_wh[:, d] + supply_ah * bank_v
        net_ah = day.delivered_ah[:, d] - drain_ah - own_ah
        net_wh = day.delivered_wh[:, d] - drain_wh - own_ah * bank_v
        year_drain_ah = year.drain_ah[d] + supply_ah * year_days
        year_drain_wh = year.drain_wh[d] + supply_ah * bank_v * year_days
        year_loss_ah = year.delivered_ah[valve] - year.delivered_ah[d]
        year_loss_wh = year.delivered_wh[valve] - year.delivered_wh[d]
        out.append(
            Ledger(
                _tuple(day.heat_wh[:, d]),
                _tuple(day.delivered_ah[:, d]),
                _tuple(day.delivered_wh[:, d]),
                _tuple(loss_ah),
                _tuple(loss_wh),
                _tuple(full_loss),
                _tuple(drain_ah),
                _tuple(drain_wh),
                _tuple(net_ah),
                _tuple(net_wh),
                float(year.heat_wh[d]),
                float(year.delivered_wh[d]),
                float(year_loss_ah),
                float(year_loss_wh),
                float(year_drain_ah),
                float(year_drain_wh),
                float(year.delivered_ah[d] - year_drain_ah - own_year_ah),
                float(year.delivered_wh[d] - year_drain_wh - own_year_ah * bank_v),
            )
        )
    return out


def _tuple(values: Sequence[float] | FloatArray) -> tuple[float, ...]:
    return tuple(float(value) for value in values)
