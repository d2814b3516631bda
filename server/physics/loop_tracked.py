"""The loop behind a converter that holds the string at its maximum-power point, as seen BEHIND diode and cable."""

import numpy as np

from server.physics import diode as dio
from server.physics.diode import FloatArray
from server.physics.loop_blocks import (
    DESTROYED_C,
    MAX_STEPS,
    MAX_TEMPERATURE_PASSES,
    Field,
    Solved,
    newton_rise,
    warmth,
)
from server.physics.loop_forward import drop_slope_per_k


def tracked_block(field: Field, _before: FloatArray | None, part: slice) -> Solved:
    """The converter holds its input, BEHIND diode and cable, where the power arriving there is greatest.

    Unknown: string junction voltage y. Power is I·(y − I·R − Vd(I)); its slope falls through zero once.
    """
    field = field.columns(part)
    string, diodes = field.string, field.diodes
    shape = field.shape
    junction_c = np.broadcast_to(field.box_c, shape).copy()
    best_v, _ = string.max_power(field.open_v)
    y = np.broadcast_to(best_v, shape).copy()
    settled = np.zeros(shape, dtype=np.bool_)
    for _ in range(MAX_TEMPERATURE_PASSES):
        n_vt = np.where(diodes.ideal | diodes.active, 0.0, diodes.ideality * dio.thermal_voltage_v(junction_c))
        is_a = dio.saturation_a(diodes, junction_c)
        inner_ohm = dio.series_ohm(diodes, junction_c)
        ohm = field.ohm + string.series_ohm + np.where(diodes.active, 0.0, inner_ohm)
        low, high = np.zeros(shape), np.broadcast_to(field.open_v, shape).copy()
        settled = np.zeros(shape, dtype=np.bool_)
        for _ in range(MAX_STEPS):
            current_a, conductance = string.current_and_conductance(y)
            i = np.maximum(current_a, 0.0)
            knee = i + dio.ACTIVE_KNEE_A
            held = diodes.regulated_v * i / knee > inner_ohm * i
            active_ohm = np.where(held, diodes.regulated_v * dio.ACTIVE_KNEE_A / knee**2, inner_ohm)
            active_v = np.where(held, diodes.regulated_v * i / knee, inner_ohm * i)
            log_v = n_vt * np.log1p(i / is_a)
            drop_v = ohm * i + log_v + np.where(diodes.active, active_v, 0.0)
            drop_ohm = ohm + n_vt / (i + is_a) + np.where(diodes.active, active_ohm, 0.0)
            bus_v = y - drop_v
            # d(power)/dy, written to rise with y: conductance·(bus_v − I·drop_ohm) − I.
            value = conductance * (bus_v - i * drop_ohm) - current_a
            curvature = (conductance - string.shunt_s) / string.slope_v
            slope = curvature * (bus_v - i * drop_ohm) + conductance * (2.0 + 2.0 * conductance * drop_ohm)
            low = np.where(value <= 0, y, low)
            high = np.where(value >= 0, y, high)
            with np.errstate(divide="ignore", invalid="ignore"):
                trial = y - value / slope
            outside = ~((trial >= low) & (trial <= high))  # a step too small to leave a bound is the root, not a miss
            trial = np.where(outside, 0.5 * (low + high), trial)
            settled = np.abs(trial - y) < 1e-9 * np.maximum(y, 1e-3)
            y = trial
            if settled.all():
                break
        current_a = np.maximum(string.current_a(y), 0.0)
        knee = current_a + dio.ACTIVE_KNEE_A
        active_v = np.maximum(diodes.regulated_v * current_a / knee, inner_ohm * current_a)
        junction_v = n_vt * np.log1p(current_a / is_a) + current_a * inner_ohm
        diode_v = np.where(diodes.ideal, 0.0, np.where(diodes.active, active_v, junction_v))
        off_c = field.box_c + field.rth * current_a * diode_v - junction_c
        warm, lost = warmth(junction_c, off_c)
        if np.all(warm | lost):
            break
        slope_k = drop_slope_per_k(diodes, diode_v, current_a, junction_c)
        rise_slope = np.where(diodes.active | diodes.ideal, 0.0, field.rth * current_a * slope_k)
        junction_c = np.minimum(junction_c + newton_rise(off_c, rise_slope), DESTROYED_C)
    bus_v = y - current_a * (field.ohm + string.series_ohm) - diode_v
    return current_a, diode_v, junction_c, bus_v, settled & warm & ~lost
