"""The loop without a logarithm in the drop (plain wire, perfect valve, active rectifier), and current running back."""

from collections.abc import Callable

import numpy as np

from server.physics import diode as dio
from server.physics.diode import DiodeCells, FloatArray
from server.physics.loop_blocks import (
    CURRENT_ATOL_A,
    CURRENT_RTOL,
    DESTROYED_C,
    MAX_STEPS,
    MAX_TEMPERATURE_PASSES,
    BoolArray,
    Field,
    Solved,
    warmth,
)
from server.physics.pv import StringCells


def dropless_block(field: Field, _before: FloatArray | None, part: slice) -> Solved:
    """Plain wire, perfect valve and active rectifier forward; plain wire backward. Unknown: string junction voltage."""
    field = field.columns(part)
    string, diodes = field.string, field.diodes
    shape = field.shape
    junction_c = np.broadcast_to(field.box_c, shape).copy()
    low = np.broadcast_to(np.minimum(field.bank_v, field.open_v), shape)
    high = np.broadcast_to(np.maximum(field.bank_v, field.open_v), shape)
    y = low.copy()
    settled = np.zeros(shape, dtype=np.bool_)
    ohm = field.ohm + string.series_ohm
    for _ in range(MAX_TEMPERATURE_PASSES):
        inner_ohm = dio.series_ohm(diodes, junction_c)

        def imbalance(y: FloatArray, inner_ohm: FloatArray = inner_ohm) -> tuple[FloatArray, FloatArray]:
            current_a, conductance = string.current_and_conductance(y)
            drop_v, drop_ohm = _held_drop(diodes, current_a, inner_ohm)
            return y - field.bank_v - current_a * ohm - drop_v, 1.0 + conductance * (ohm + drop_ohm)

        y, settled = _bracketed(imbalance, low, high, y, string)
        current_a = string.current_a(y)
        diode_v, _ = _held_drop(diodes, current_a, inner_ohm)
        off_c = field.box_c + field.rth * current_a * diode_v - junction_c
        warm, lost = warmth(junction_c, off_c)
        if np.all(warm | lost):
            break
        junction_c = np.minimum(junction_c + off_c, DESTROYED_C)
    return current_a, diode_v, junction_c, None, settled & warm & ~lost


def _held_drop(diodes: DiodeCells, current_a: FloatArray, inner_ohm: FloatArray) -> tuple[FloatArray, FloatArray]:
    """Drop of an active rectifier at a forward current, and its slope; both 0 for the references."""
    i = np.maximum(current_a, 0.0)
    knee = i + dio.ACTIVE_KNEE_A
    held_v, on_v = diodes.regulated_v * i / knee, inner_ohm * i
    slope = np.where(held_v > on_v, diodes.regulated_v * dio.ACTIVE_KNEE_A / knee**2, inner_ohm)
    return np.where(diodes.active, np.maximum(held_v, on_v), 0.0), np.where(diodes.active, slope, 0.0)


def _bracketed(
    f: Callable[[FloatArray], tuple[FloatArray, FloatArray]],
    low: FloatArray,
    high: FloatArray,
    start: FloatArray,
    string: StringCells,
) -> tuple[FloatArray, BoolArray]:
    """Root of a rising f in [low, high] by Newton, halving the bracket where a step would leave it."""
    low, high, y = low.copy(), high.copy(), start.copy()
    settled = np.zeros(y.shape, dtype=np.bool_)
    for _ in range(MAX_STEPS):
        value, slope = f(y)
        low = np.where(value <= 0, y, low)
        high = np.where(value >= 0, y, high)
        step = value / slope
        trial = y - step
        outside = (trial < low) | (trial > high) | ~np.isfinite(trial)
        trial = np.where(outside, 0.5 * (low + high), trial)
        moved = np.abs(trial - y)
        y = np.where(settled, y, trial)
        # A volt of error moves the string's current by its conductance: hold that below the tolerance.
        current_a, conductance = string.current_and_conductance(y)
        allowed_v = (1e-3 * CURRENT_ATOL_A + CURRENT_RTOL * np.abs(current_a)) / conductance
        settled |= (moved < np.maximum(0.1 * allowed_v, 4e-16 * np.abs(y))) | (value == 0)
        if settled.all():
            break
    return y, settled


def reverse_block(field: Field, _before: FloatArray | None, part: slice) -> Solved:
    """The bank pushes leakage through the fielding diode into the dark string. Unknown: reverse voltage on the diode.

    The junction starts at box temperature and warms until it settles, so of two equilibria it finds the cool one.
    """
    field = field.columns(part)
    string, diodes = field.string, field.diodes
    shape = field.shape
    junction_c = np.broadcast_to(field.box_c, shape).copy()
    top_v = np.broadcast_to(np.maximum(field.bank_v - field.open_v, 0.0), shape)
    ohm = field.ohm + string.series_ohm
    u = top_v.copy()
    settled = np.zeros(shape, dtype=np.bool_)
    leak_a = np.zeros(shape)
    warm = np.zeros(shape, dtype=np.bool_)
    for _ in range(MAX_TEMPERATURE_PASSES):
        law = dio.ReverseLaw.at(diodes, junction_c)
        low, high = np.zeros(shape), top_v.copy()
        settled = np.zeros(shape, dtype=np.bool_)
        for _ in range(MAX_STEPS):
            leak_a, leak_s = law.current_and_slope(u)
            string_a, conductance = string.current_and_conductance(field.bank_v - u - ohm * leak_a)
            value = leak_a + string_a
            low = np.where(value <= 0, u, low)
            high = np.where(value >= 0, u, high)
            step = value / (leak_s * (1.0 + conductance * ohm) + conductance)
            trial = u - step
            trial = np.where((trial < low) | (trial > high), 0.5 * (low + high), trial)
            settled = (np.abs(leak_s * (trial - u)) < 0.1 * (CURRENT_ATOL_A * 1e-3 + CURRENT_RTOL * leak_a)) & (
                np.abs(value) < CURRENT_ATOL_A * 1e-3 + 0.1 * CURRENT_RTOL * leak_a
            )
            settled |= np.abs(trial - u) <= 2e-16 * np.abs(u)
            u = trial
            if settled.all():
                break
        leak_a, _ = law.current_and_slope(u)
        off_c = field.box_c + field.rth * leak_a * u - junction_c
        warm, lost = warmth(junction_c, off_c)
        if np.all(warm | lost):
            break
        # The heat's growth with temperature, were the string to limit nothing; used only while safely stable.
        growth = field.rth * leak_a * u * diodes.leakage_ev / dio.BOLTZMANN_EV_PER_K / (junction_c + dio.ZERO_C_K) ** 2
        junction_c = np.minimum(junction_c + np.where(growth < 0.3, off_c / (1.0 - growth), off_c), DESTROYED_C)
    return -leak_a, -u, junction_c, None, settled & warm & ~lost
