"""Loss -> junction temperature: heat paths, box air, heatsinks, and whether leakage can run away."""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.special import lambertw

from server.errors import InputError
from server.physics import diode as dio
from server.physics.diode import DiodeCells, FloatArray

Box = Literal["open_shade", "light_box", "dark_box", "junction_box", "engine_room", "stated"]


@dataclass(frozen=True, slots=True)
class BoxRise:
    """Air around the diode: so many °C above outside air at 1000 W/m2, so much of the way to the cell, or absolute."""

    label: str
    rise_c: float = 0.0
    of_cell_rise: float = 0.0
    absolute_c: float | None = None


# Engineering estimates from absorptance and a box's surface at about 10 W/m2K; the engine room is common practice.
BOXES: dict[Box, BoxRise] = {
    "open_shade": BoxRise("open or shaded, behind the module", 5.0),
    "light_box": BoxRise("light-coloured box in the sun", 10.0),
    "dark_box": BoxRise("dark box in the sun", 25.0),
    "junction_box": BoxRise("the module's own junction box", of_cell_rise=0.8),
    "engine_room": BoxRise("engine room", absolute_c=55.0),
}


def box_air_c(box: Box, poa_w_m2: FloatArray, air_c: FloatArray, cell_c: FloatArray) -> FloatArray:
    """Air around the diode for every row; by night the outside air, or the engine room's. Shapes: all [T].

    Raises:  InputError for "stated", whose temperatures the job gives.
    """
    if box not in BOXES:
        raise InputError("box", f"{box!r} is not one of {', '.join(BOXES)}")
    facts = BOXES[box]
    if facts.absolute_c is not None:
        return np.where(poa_w_m2 > 0, np.maximum(air_c, facts.absolute_c), air_c)
    rise = facts.rise_c * poa_w_m2 / 1000.0 + facts.of_cell_rise * np.maximum(cell_c - air_c, 0.0)
    return np.asarray(air_c + rise)


def altitude_factor(altitude_m: float) -> float:
    """How much worse still air cools at altitude: multiply a resistance to air by it. Source: 1 − h/17500 (trade)."""
    return 1.0 / max(1.0 - max(altitude_m, 0.0) / 17_500.0, 0.4)


def junction_c(ambient_c: float, power_w: float, *path_c_per_w: float) -> float:
    """Junction temperature over a chain of thermal resistances."""
    return ambient_c + power_w * sum(path_c_per_w)


def sink_needed_c_per_w(
    junction_limit_c: float, ambient_c: float, power_w: float, rth_jc_c_per_w: float, interface_c_per_w: float
) -> float:
    """Largest heatsink resistance that holds the junction at its limit; negative where no sink can."""
    if power_w <= 0:
        return math.inf
    return (junction_limit_c - ambient_c) / power_w - rth_jc_c_per_w - interface_c_per_w


# A heatsink's figure is quoted at this rise over the air; with less rise the air moves less and carries less. The
# fourth root is that of laminar natural convection (textbook), and 30 K of rise makes 25 % (a heatsink maker's page).
QUOTED_RISE_C = 75.0


def sink_at_rise_c_per_w(quoted_c_per_w: float, power_w: float, quoted_rise_c: float = QUOTED_RISE_C) -> float:
    """Resistance of a heatsink at the rise that `power_w` gives it, from its figure at `quoted_rise_c`.

    R = R_quoted·(quoted_rise/rise)^(1/4) with rise = power·R, solved for R. Never better than quoted.
    """
    if power_w <= 0 or quoted_c_per_w <= 0:
        return quoted_c_per_w
    rise_c = float((power_w * quoted_c_per_w * quoted_rise_c**0.25) ** 0.8)
    return max(rise_c / power_w, quoted_c_per_w)


def sink_to_buy_c_per_w(needed_c_per_w: float, power_w: float, quoted_rise_c: float = QUOTED_RISE_C) -> float:
    """The quoted figure that a heatsink must have to be `needed_c_per_w` at the rise that `power_w` gives it."""
    rise_c = power_w * needed_c_per_w
    if rise_c <= 0:
        return needed_c_per_w
    return needed_c_per_w * min(float((rise_c / quoted_rise_c) ** 0.25), 1.0)


def shared_sink_c_per_w(needed_c_per_w: float, diodes: int) -> float:
    """Resistance of one heatsink under several equal diodes: each sees the rise that all of them make."""
    return needed_c_per_w / diodes


BOX_W_PER_M2_C = 10.0  # heat leaving a small closed box, W per m² and °C: an engineering estimate


def box_self_c_per_w(area_m2: float) -> float:
    """How far the heat inside warms the air of a closed box with this outer area."""
    return 1.0 / (BOX_W_PER_M2_C * area_m2)


def allowable_ambient_c(junction_limit_c: float, rth_c_per_w: float, forward_w: float, reverse_w: float) -> float:
    """Air in which both losses still hold the junction at its limit: T = TJmax − Rth·(Pf + Pr).

    Source: reverse derating as on ON Semiconductor's MBR140SF sheet.
    """
    return junction_limit_c - rth_c_per_w * (forward_w + reverse_w)


def derated_power_w(junction_limit_c: float, ambient_c: float, rth_c_per_w: float) -> float:
    """Power that brings the junction to its limit; 0 above the limit."""
    return max(0.0, (junction_limit_c - ambient_c) / rth_c_per_w)


def forward_heat(
    diodes: DiodeCells, current_a: FloatArray, box_c: FloatArray, rth_c_per_w: FloatArray
) -> tuple[FloatArray, FloatArray]:
    """Junction temperature and drop under a continuous forward current. Shapes broadcast with [D].

    The drop falls as the junction warms, so the fixed point is approached from above by Newton and is unique. It is
    cut off at 400 °C, where no law holds any more.
    """
    t_c = np.asarray(box_c + 0.0 * current_a * rth_c_per_w, dtype=np.float64)
    for _ in range(60):
        drop = dio.forward_drop_v(diodes, current_a, t_c)
        slope = (dio.forward_drop_v(diodes, current_a, t_c + 0.5) - drop) / 0.5
        off = box_c + rth_c_per_w * current_a * drop - t_c
        t_c = np.minimum(t_c + off / np.maximum(1.0 - rth_c_per_w * current_a * slope, 0.2), 400.0)
        if np.all(np.abs(off) < 1e-6):
            break
    return t_c, dio.forward_drop_v(diodes, current_a, t_c)


# --- leakage heats, heat leaks ----------------------------------------------------------------------------------------


def leakage_limit_a(reverse_v: float, reverse_share: float, growth_per_k: float, rth_c_per_w: float) -> float:
    """Leakage at which an exponentially growing loss runs away. Source: STMicroelectronics AN869, dP/dT = 1/Rth."""
    return 1.0 / (reverse_v * reverse_share * growth_per_k * rth_c_per_w)


def tipping_c(limit_a: float, known_a: float, known_c: float, growth_per_k: float) -> float:
    """Temperature where leakage reaches `limit_a`, grown exponentially from a known point."""
    return known_c + math.log(limit_a / known_a) / growth_per_k


def growth_per_k(first_a: float, first_c: float, second_a: float, second_c: float) -> float:
    """Exponential growth between two leakage figures; ln 2 over it is the doubling interval."""
    return math.log(second_a / first_a) / (second_c - first_c)


@dataclass(frozen=True, slots=True)
class ExponentialLoss:
    """P(T) = `loss_25_w`·exp(growth·(T − 25)) through one thermal resistance, in closed form."""

    loss_25_w: float
    growth_per_k: float
    rth_c_per_w: float

    @property
    def critical_junction_c(self) -> float:
        """Junction temperature where dP/dT equals 1/Rth."""
        return 25.0 - math.log(self.rth_c_per_w * self.loss_25_w * self.growth_per_k) / self.growth_per_k

    @property
    def critical_ambient_c(self) -> float:
        """Highest ambient that still has a stable point: one growth interval below the critical junction."""
        return self.critical_junction_c - 1.0 / self.growth_per_k

    def stable_c(self, ambient_c: float) -> float | None:
        """The stable junction temperature, or None: no stable point. By the principal branch of Lambert's W."""
        g = self.growth_per_k
        argument = -self.rth_c_per_w * self.loss_25_w * g * math.exp(g * (ambient_c - 25.0))
        if argument < -math.exp(-1.0):
            return None
        return float(ambient_c - lambertw(argument).real / g)


@dataclass(frozen=True, slots=True, eq=False)
class ReverseBalance:
    """Self-heating in reverse, one entry per diode, [D]. NaN: there is no such temperature below 400 °C."""

    stable_c: FloatArray
    """Where the junction settles; NaN means no stable point."""
    tipping_c: FloatArray
    """A junction hotter than this at the moment of reversal runs away."""
    critical_ambient_c: FloatArray
    """No stable point exists in air warmer than this."""


def reverse_balance(
    diodes: DiodeCells, reverse_v: FloatArray | float, ambient_c: float, rth_c_per_w: FloatArray, halvings: int = 36
) -> ReverseBalance:
    """Equilibria of T = ambient + Rth·VR·IR(T), the bank holding the full reverse voltage.

    With g(T) = T − Rth·VR·IR(T) an ambient has an equilibrium where g crosses it: rising, it is stable; falling, it is
    the tipping point; and the top of g is the critical ambient. g rises, then falls, once each.

    Shapes:  rth_c_per_w [D], reverse_v [D] or scalar. halvings: 36 for 1e-8 K, 12 for a tenth of a K.
    """
    grid = np.linspace(-60.0, 400.0, 116)[:, None]
    volts = np.asarray(reverse_v, dtype=np.float64)

    def level(t_c: FloatArray) -> FloatArray:
        return np.asarray(t_c - rth_c_per_w * volts * dio.reverse_a(diodes, volts, t_c))

    g = level(grid)
    top = np.argmax(g, axis=0)
    low, high = grid[np.maximum(top - 1, 0), 0], grid[np.minimum(top + 1, len(grid) - 1), 0]
    for _ in range(halvings + 8):  # g is unimodal, so thirds will do: with 44 of them 8 K shrink to 1e-7 K
        a, b = low + (high - low) / 3, high - (high - low) / 3
        up = level(a) < level(b)
        low, high = np.where(up, a, low), np.where(up, high, b)
    peak_c = 0.5 * (low + high)
    critical = level(peak_c)
    exists = critical >= ambient_c
    # Stable: between ambient and the peak. Tipping: beyond the peak.
    s_low, s_high = np.full_like(peak_c, ambient_c), np.maximum(peak_c, ambient_c)
    t_low, t_high = peak_c.copy(), np.full_like(peak_c, 400.0)
    never = level(t_high) > ambient_c
    for _ in range(halvings):
        s_mid, t_mid = 0.5 * (s_low + s_high), 0.5 * (t_low + t_high)
        below, above = level(s_mid) < ambient_c, level(t_mid) > ambient_c
        s_low, s_high = np.where(below, s_mid, s_low), np.where(below, s_high, s_mid)
        t_low, t_high = np.where(above, t_mid, t_low), np.where(above, t_high, t_mid)
    return ReverseBalance(
        np.where(exists, 0.5 * (s_low + s_high), np.nan),
        np.where(exists & ~never, 0.5 * (t_low + t_high), np.nan),
        np.where(peak_c > 399.0, np.nan, critical),
    )
