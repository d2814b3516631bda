"""Keeps the two corners in order: a typical part is never worse than a maximum one, cold or hot, at any voltage."""

from dataclasses import replace

import numpy as np

from server.catalog.forward import FloatArray, ForwardFit
from server.catalog.reverse import heat_exponent
from server.errors import InputError
from server.physics.diode import DiodeCells, JunctionLaw, reverse_a

COLD_C, HOTTEST_C = -25.0, 125.0
SAMPLE_C = np.linspace(COLD_C, HOTTEST_C, 31)
LEAST_A = 1e-9  # a leakage below this decides nothing: 1 mAh in a century
CROSSING_LIMIT_V = 0.1  # columns of one sheet may cross by this much, by rounding, pulse heating and extrapolation
LOWEST_V = 5.0  # below this a bank does not charge


def limited_forward(typical: ForwardFit, maximum: ForwardFit, top_a: float) -> tuple[ForwardFit, float]:
    """The typical forward law, lowered where it would pass the maximum, and by how many volts.

    Raises:  InputError where the columns cross by more than one diode's can.
    """
    i = np.geomspace(1e-3 * top_a, top_a, 13)[:, None]
    ceiling_v = maximum.drop_v(i, SAMPLE_C)
    worst_v = float(np.max(typical.drop_v(i, SAMPLE_C) - ceiling_v))
    if worst_v <= 1e-12:
        return typical, 0.0
    if worst_v > CROSSING_LIMIT_V:
        raise InputError(
            "forward",
            f"the typical drops lie up to {worst_v:.2f} V above the maximum ones at the same current and temperature; "
            f"{CROSSING_LIMIT_V:g} V is the most that rounding explains",
        )
    lowered = typical.shifted(-worst_v)
    still_v = float(np.max(lowered.drop_v(i, SAMPLE_C) - ceiling_v))
    return (lowered if still_v <= 1e-3 else maximum), worst_v  # it is resistance that passes: one law for both


def _sample_volts(vrrm_v: float) -> FloatArray:
    return np.unique(np.geomspace(min(LOWEST_V, vrrm_v), vrrm_v, 15))[:, None]


def raised_maximum(typical: JunctionLaw, maximum: JunctionLaw, vrrm_v: float) -> JunctionLaw:
    """The maximum law with more leakage below its rating, where a PRINTED typical would pass it there.

    Only its growth with voltage is made flatter: a maximum is printed at the rating, where it stays as it is.
    """
    volts = _sample_volts(vrrm_v)
    floor = np.log(reverse_a(DiodeCells.of([typical]), volts, SAMPLE_C))
    law = maximum
    while law.leakage_exponent > 0.07:
        over = floor - np.log(np.maximum(reverse_a(DiodeCells.of([law]), volts, SAMPLE_C), LEAST_A))
        if np.all(over[:-1] <= np.maximum(over[-1], 0.0) + 1e-9):
            break
        law = replace(law, leakage_exponent=max(0.93 * law.leakage_exponent, 0.07))
    return law


def limited_reverse(typical: JunctionLaw, maximum: JunctionLaw, vrrm_v: float) -> tuple[JunctionLaw, float]:
    """The typical law with its leakage lowered where it would pass the maximum, and by how much at worst (ln).

    On the axis of `heat_exponent` ln(leakage) is a straight line: its cold and hot ends are lowered in turn, which
    turns the line rather than moving the end that is right.
    """
    volts = _sample_volts(vrrm_v)
    ceiling = np.log(np.maximum(reverse_a(DiodeCells.of([maximum]), volts, SAMPLE_C), LEAST_A))
    x_cold, x_hot = (float(heat_exponent(c)) for c in (COLD_C, HOTTEST_C))
    start = np.log(typical.leakage_a) + typical.leakage_ev * np.array([x_cold, x_hot])
    ends: FloatArray = start.copy()
    law = typical
    for _ in range(60):
        over = np.max(np.log(reverse_a(DiodeCells.of([law]), volts, SAMPLE_C)) - ceiling, axis=0)
        if np.max(over) <= 1e-9:
            break
        for end, side in ((0, over[: len(over) // 2]), (1, over[len(over) // 2 :])):
            worst = float(np.max(side))
            if worst > 1e-9:
                ends[end] -= worst + 1e-6
        ends[0] = min(ends[0], ends[1])  # leakage never falls with heat
        energy_ev = (ends[1] - ends[0]) / (x_hot - x_cold)
        law = replace(typical, leakage_a=float(np.exp(ends[0] - energy_ev * x_cold)), leakage_ev=float(energy_ev))
    return law, float(np.max(start - ends))
