"""Forward points -> saturation current, ideality, barrier, series resistance and its growth with heat."""

import functools
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import least_squares

from server.catalog.classes import BARRIER_SD_EV, ClassValues
from server.physics.diode import BOLTZMANN_EV_PER_K, T0_K, ZERO_C_K

FloatArray = NDArray[np.float64]

PRINTED_SD_V = 0.003  # drops are printed to 10 mV: the spread of that rounding
EXACT_SD_V = 0.0001  # a slope given by the user is taken at its word
HOT_SPAN_K = 75.0  # 25 to 100 °C, where a slope becomes a second point
MIN_OHM_SHARE = 0.05  # the law keeps this share of the series resistance however cold


@dataclass(frozen=True, slots=True)
class Centre:
    """A value expected before any point is seen, and how firmly (one standard deviation)."""

    value: float
    sd: float


@dataclass(frozen=True, slots=True)
class ForwardPrior:
    """What is expected of a column: from its technology, or from the other column of the same sheet."""

    temperature_power: float
    ideality: Centre
    ideality_bounds: tuple[float, float]
    series_drop_v: Centre  # at the first printed current
    ohm_rise_per_k: Centre
    slope_v_per_k: Centre | None
    barrier_ev: Centre | None
    saturation_bounds_a: tuple[float, float] = (1e-39, 5.0)


@dataclass(frozen=True, slots=True)
class ForwardFit:
    """Forward half of a JunctionLaw."""

    saturation_a: float
    ideality: float
    barrier_ev: float
    temperature_power: float
    series_ohm: float
    series_ohm_per_k: float

    def shifted(self, drop_v: float) -> "ForwardFit":
        """The same shape with `drop_v` more drop at 25 °C."""
        steps = np.clip(-drop_v / (self.ideality * BOLTZMANN_EV_PER_K * T0_K), -600.0, 600.0)
        return replace(self, saturation_a=self.saturation_a * float(np.exp(steps)))

    def lowered(self, drop_v: float, at_a: float) -> "ForwardFit":
        """The law with `drop_v` less drop at `at_a` and 25 °C, taken from junction and resistance in proportion.

        The 11 sheets that print both columns at two currents show the gap grow half as much again (median) when the
        current doubles, so part of the spread between parts is resistance.
        """
        series_share = self.series_ohm * at_a / float(self.drop_v(at_a, 25.0))
        kept = 1.0 - drop_v / float(self.drop_v(at_a, 25.0))
        thinner = replace(self, series_ohm=self.series_ohm * kept, series_ohm_per_k=self.series_ohm_per_k * kept)
        return thinner.shifted(-drop_v * (1.0 - series_share))

    def drop_v(self, current_a: FloatArray | float, junction_c: FloatArray | float) -> FloatArray:
        """Drop of the whole die: the same law as `diode.forward_drop_v`, without its many columns. Broadcasts."""
        i = np.asarray(current_a, dtype=np.float64)
        t_k = np.asarray(junction_c, dtype=np.float64) + ZERO_C_K
        n = self.ideality
        y = (1 / T0_K - 1 / t_k) / BOLTZMANN_EV_PER_K
        log_is = np.log(self.saturation_a) + self.temperature_power / n * np.log(t_k / T0_K) + self.barrier_ev / n * y
        ohm = self.series_ohm + self.series_ohm_per_k * (t_k - T0_K)
        ohm = np.maximum(ohm, MIN_OHM_SHARE * self.series_ohm)
        return np.asarray(n * BOLTZMANN_EV_PER_K * t_k * np.log1p(i * np.exp(-log_is)) + i * ohm)


def class_prior(
    values: ClassValues, *, one_current: bool, one_temperature: bool, ideality: float | None, exact: bool
) -> ForwardPrior:
    """Expectation from the technology alone; firm only on what the points leave open."""
    n = values.ideality if ideality is None else ideality
    return ForwardPrior(
        temperature_power=values.temperature_power,
        ideality=Centre(n, values.ideality_sd),
        ideality_bounds=(values.ideality_low, values.ideality_high) if ideality is None else (n - 1e-9, n + 1e-9),
        series_drop_v=Centre(values.series_drop_v, values.series_drop_sd_v if one_current else 0.3),
        ohm_rise_per_k=Centre(values.ohm_rise_per_k, 0.02 if exact else 0.002),
        slope_v_per_k=Centre(values.slope_v_per_k, 0.2e-3 if one_temperature else 2e-3),
        barrier_ev=None if values.barrier_ev is None else Centre(values.barrier_ev, BARRIER_SD_EV),
    )


def column_prior(other: ForwardFit, first_a: float, kind: str | None = None) -> ForwardPrior:
    """Expectation from the other column of the same sheet: same die, so same n, barrier and about the same ohm.

    `kind` of the column to be fitted: a typical part must not saturate below a maximum one, which would make its drop
    the higher one at light load. None for another maker's column, which has no such order.
    """
    bounds_a = {"typ": (other.saturation_a, 5.0), "max": (1e-39, other.saturation_a), None: (1e-39, 5.0)}[kind]
    rise = other.series_ohm_per_k / other.series_ohm if other.series_ohm > 0 else 0.0
    drop_v = other.series_ohm * first_a
    return ForwardPrior(
        temperature_power=other.temperature_power,
        ideality=Centre(other.ideality, 0.005),
        ideality_bounds=(other.ideality - 0.05, other.ideality + 0.05),
        series_drop_v=Centre(drop_v, 0.02 + 0.2 * drop_v),
        ohm_rise_per_k=Centre(rise, 0.001),
        slope_v_per_k=None,
        barrier_ev=Centre(other.barrier_ev, 0.02),
        saturation_bounds_a=bounds_a,
    )


@functools.lru_cache(maxsize=4096)
def fit_forward(points: tuple[tuple[float, float, float], ...], prior: ForwardPrior, sd_v: float) -> ForwardFit:
    """The likeliest forward law for `points` (A, V, °C) and the prior: least squares on both at once.

    Unknown: ln Is, n, barrier, series drop at the first current, growth of the series resistance per kelvin.
    """
    table = np.array(points, dtype=np.float64)
    first_a = float(table[:, 0].min())
    # Two more places where the slope of the prior is read off: the first current, cold and hot.
    probes = np.array([[first_a, 0.0, 25.0], [first_a, 0.0, 25.0 + HOT_SPAN_K]])
    every = np.vstack([table, probes])
    i, t_k = every[:, 0], every[:, 2] + ZERO_C_K
    vt = BOLTZMANN_EV_PER_K * t_k
    y = (1 / T0_K - 1 / t_k) / BOLTZMANN_EV_PER_K
    log_tau = np.log(t_k / T0_K)
    share, over_k = i / first_a, t_k - T0_K
    power = prior.temperature_power
    slope, barrier = prior.slope_v_per_k, prior.barrier_ev
    slope_scale = 0.0 if slope is None else 1.0 / (HOT_SPAN_K * slope.sd)

    def drops_and_slopes(x: FloatArray) -> tuple[FloatArray, FloatArray]:
        log_is0, n, phi, series_v, rise = x
        log_is = log_is0 + (power * log_tau + phi * y) / n
        z = np.exp(np.minimum(np.log(i) - log_is, 600.0))
        log1p, sat = np.log1p(z), z / (1 + z)
        grown = np.maximum(1 + rise * over_k, MIN_OHM_SHARE)
        drop = n * vt * log1p + share * series_v * grown
        by = np.stack(
            [
                -n * vt * sat,
                vt * log1p + vt * sat * (power * log_tau + phi * y) / n,
                -vt * sat * y,
                share * grown,
                np.where(grown > MIN_OHM_SHARE, share * series_v * over_k, 0.0),
            ],
            axis=1,
        )
        return drop, by

    centres = np.array([prior.ideality.value, prior.series_drop_v.value, prior.ohm_rise_per_k.value])
    sds = np.array([prior.ideality.sd, prior.series_drop_v.sd, prior.ohm_rise_per_k.sd])

    def misfit(x: FloatArray) -> FloatArray:
        drop, _ = drops_and_slopes(x)
        parts = [(drop[:-2] - table[:, 1]) / sd_v, (x[[1, 3, 4]] - centres) / sds]
        if slope is not None:
            parts.append(np.array([(drop[-1] - drop[-2] - slope.value * HOT_SPAN_K) * slope_scale]))
        if barrier is not None:
            parts.append(np.array([(x[2] - barrier.value) / barrier.sd]))
        return np.concatenate(parts)

    def jacobian(x: FloatArray) -> FloatArray:
        _, by = drops_and_slopes(x)
        weak = np.zeros((3, 5))
        weak[[0, 1, 2], [1, 3, 4]] = 1 / sds
        rows = [by[:-2] / sd_v, weak]
        if slope is not None:
            rows.append(((by[-1] - by[-2]) * slope_scale)[None, :])
        if barrier is not None:
            rows.append(np.array([[0.0, 0.0, 1 / barrier.sd, 0.0, 0.0]]))
        return np.vstack(rows)

    n0 = float(np.clip(prior.ideality.value, *prior.ideality_bounds))
    at = table[int(np.argmin(table[:, 0] + 1e-6 * table[:, 2]))]
    series0_v = min(prior.series_drop_v.value, 0.5 * at[1])
    junction_v = at[1] - series0_v
    slope_guess = -1e-3 if slope is None else min(slope.value, 0.0)
    phi0 = junction_v - T0_K * (slope_guess + power * BOLTZMANN_EV_PER_K) if barrier is None else barrier.value
    phi0 = float(np.clip(phi0, 0.05, 2.5))
    at_k = at[2] + ZERO_C_K
    log_is0 = np.log(at[0]) - junction_v / (n0 * BOLTZMANN_EV_PER_K * at_k)
    log_is0 -= (power * np.log(at_k / T0_K) + phi0 * (1 / T0_K - 1 / at_k) / BOLTZMANN_EV_PER_K) / n0
    start = np.array([log_is0, n0, phi0, max(series0_v, 1e-4), prior.ohm_rise_per_k.value])
    low = np.array([np.log(prior.saturation_bounds_a[0]) - 1e-9, prior.ideality_bounds[0], 0.02, 0.0, -0.009])
    high = np.array([np.log(prior.saturation_bounds_a[1]) + 1e-9, prior.ideality_bounds[1], 3.0, 4.0, 0.03])
    found = least_squares(
        misfit, np.clip(start, low + 1e-12, high - 1e-12), jac=jacobian, bounds=(low, high), x_scale="jac", ftol=1e-10
    )
    log_is, n, phi, series_v, rise = (float(value) for value in found.x)
    ohm = series_v / first_a
    return ForwardFit(float(np.exp(log_is)), n, phi, power, ohm, ohm * rise)
