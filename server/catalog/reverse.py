"""Leakage points -> leakage at a reference voltage and 25 °C, its growth with voltage and with heat."""

from dataclasses import dataclass

import numpy as np
from scipy.optimize import least_squares

from server.catalog.forward import FloatArray, ForwardFit
from server.physics.diode import BOLTZMANN_EV_PER_K, T0_K, ZERO_C_K, DiodeCells, JunctionLaw, reverse_a

PRINTED_SD_LN = 0.02  # leakages are printed to two digits
EV_BOUNDS = (0.0, 1.5)
EXPONENT_BOUNDS = (0.06, 6.0)
Points = tuple[tuple[float, float, float], ...]  # (V, A, °C)


@dataclass(frozen=True, slots=True)
class ReverseFit:
    """Reverse half of a JunctionLaw."""

    leakage_a: float
    leakage_ref_v: float
    leakage_exponent: float
    leakage_ev: float


def heat_exponent(junction_c: FloatArray | float) -> FloatArray:
    """(1/T0 − 1/T)/k: multiplied by an activation energy, the ln of the growth since 25 °C."""
    return np.asarray((1 / T0_K - 1 / (np.asarray(junction_c) + ZERO_C_K)) / BOLTZMANN_EV_PER_K)


def join(forward: ForwardFit, reverse: ReverseFit) -> JunctionLaw:
    """Both halves as the law that the rest of the program uses."""
    return JunctionLaw(
        saturation_a=forward.saturation_a,
        ideality=forward.ideality,
        barrier_ev=forward.barrier_ev,
        temperature_power=forward.temperature_power,
        series_ohm=forward.series_ohm,
        series_ohm_per_k=forward.series_ohm_per_k,
        leakage_a=reverse.leakage_a,
        leakage_ref_v=reverse.leakage_ref_v,
        leakage_exponent=reverse.leakage_exponent,
        leakage_ev=reverse.leakage_ev,
    )


def several_voltages(points: Points) -> bool:
    """Whether two voltages are printed at one temperature, so that the growth with voltage can be seen."""
    return any(c1 == c2 and v1 != v2 for v1, _, c1 in points for v2, _, c2 in points)


def several_temperatures(points: Points) -> bool:
    """Whether two temperatures at least 20 K apart are printed, in leakage points or in forward ones."""
    celsius = [c for _, _, c in points]
    return max(celsius) - min(celsius) >= 20.0


def fit_reverse(
    points: Points,
    forward: ForwardFit | None,
    ref_v: float,
    leakage_ev: float | None,
    exponent: float,
    exponent_sd: float | None,
) -> ReverseFit:
    """The likeliest leakage for `points`; a given activation energy is held, None asks the points.

    The logarithm is linear in ln A, in the activation energy and in the exponent, so this is one linear solution:
    exact for two temperatures at one voltage. Where voltages differ, the true law (its share of saturation current
    included, hence `forward`) polishes it. `exponent_sd` None holds the exponent.
    """
    volts, amps, celsius = (np.array(column, dtype=np.float64) for column in zip(*points, strict=True))
    heat, log_v = heat_exponent(celsius), np.log(volts / ref_v)
    held_ev = 0.0 if leakage_ev is None else leakage_ev
    rows = [np.stack([np.ones_like(heat), heat, log_v], axis=1) / PRINTED_SD_LN]
    target = [np.log(amps) / PRINTED_SD_LN]
    hold_ev, hold_m = leakage_ev is not None, exponent_sd is None
    weight_m = 1e6 if exponent_sd is None else 1 / exponent_sd
    rows.append(np.array([[0.0, 1e6 if hold_ev else 0.0, 0.0], [0.0, 0.0, weight_m]]))
    target.append(np.array([1e6 * held_ev if hold_ev else 0.0, weight_m * exponent]))
    log_a, ev, m = np.linalg.lstsq(np.vstack(rows), np.concatenate(target), rcond=None)[0]
    x = np.array([log_a, np.clip(ev, *EV_BOUNDS), np.clip(m, *EXPONENT_BOUNDS)])
    if ev != x[1] or m != x[2]:  # at a bound: the level again, for the bounded slope
        x[0] = np.mean(np.log(amps) - x[1] * heat - x[2] * log_v)
    if forward is not None and len(set(volts)) > 1:
        x = _polished(x, volts, amps, celsius, forward, ref_v, hold_ev, hold_m, exponent, exponent_sd or 1.0)
    return ReverseFit(float(np.exp(x[0])), ref_v, float(x[2]), float(x[1]))


def _polished(
    x: FloatArray,
    volts: FloatArray,
    amps: FloatArray,
    celsius: FloatArray,
    forward: ForwardFit,
    ref_v: float,
    hold_ev: bool,
    hold_m: bool,
    exponent: float,
    exponent_sd: float,
) -> FloatArray:
    """`x` = (ln A, eV, exponent) moved to the best fit of the law itself."""
    free = np.array([True, not hold_ev, not hold_m])
    low, high = np.array([-41.0, EV_BOUNDS[0], EXPONENT_BOUNDS[0]]), np.array([2.0, EV_BOUNDS[1], EXPONENT_BOUNDS[1]])

    def whole(part: FloatArray) -> FloatArray:
        full = x.copy()
        full[free] = part
        return full

    def misfit(part: FloatArray) -> FloatArray:
        log_a, ev, m = whole(part)
        law = join(forward, ReverseFit(float(np.exp(log_a)), ref_v, float(m), float(ev)))
        ours = reverse_a(DiodeCells.of([law]), volts, celsius)
        return np.append(np.log(ours / amps) / PRINTED_SD_LN, (m - exponent) / exponent_sd)

    start = np.clip(x[free], low[free] + 1e-9, high[free] - 1e-9)
    found = least_squares(misfit, start, bounds=(low[free], high[free]), x_scale="jac", ftol=1e-8, max_nfev=40)
    return whole(found.x)
