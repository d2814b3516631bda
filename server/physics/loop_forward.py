"""Current forward through junction diodes, their temperature settled with it."""

from dataclasses import dataclass, replace
from functools import partial

import numpy as np

from server.physics import diode as dio
from server.physics.diode import DiodeCells, FloatArray
from server.physics.loop_blocks import (
    CURRENT_ATOL_A,
    CURRENT_RTOL,
    DESTROYED_C,
    MAX_BLOCK_COLUMNS,
    MAX_STEPS,
    MAX_TEMPERATURE_PASSES,
    BoolArray,
    Field,
    IndexArray,
    Result,
    Solved,
    Solver,
    newton_rise,
    warmth,
)

# A Newton step of x, in units of nVt, leaves half of x² of e = I + Is for the next one: enough at this share of I.
LAST_STEP_SHARE = 1e-12
# A block whose last step is below this everywhere, with currents well above it, needs no closer look.
QUICK_STEP_A, QUICK_LEAST_A = 2e-11, 1e-4
TINY_A = 1e-15  # a start that still has a logarithm


def forward_solver(field: Field) -> Solver:
    """The solver for these rows; where one temperature and one resistance serve all of them, with its laws at hand."""
    string_ohm = field.string.series_ohm
    heats = bool(np.any(field.rth > 0))
    if not heats and np.ptp(field.box_c) == 0.0 and np.ptp(string_ohm) == 0.0:
        desk = _Desk.of((min(MAX_BLOCK_COLUMNS, field.shape[0]), field.shape[1]))
        return partial(forward_block, uniform=_ForwardLaw.at(field, field.box_c[:1]), desk=desk)
    return forward_block


def forward_block(
    field: Field,
    before: FloatArray | None,
    part: slice,
    uniform: "_ForwardLaw | None" = None,
    desk: "_Desk | None" = None,
) -> Solved:
    """Junction diodes under forward current, their temperature settled with it.

    `uniform` is the law of all columns where one temperature serves all rows.
    """
    start_a = field.offered_a if before is None else np.minimum(np.maximum(before, TINY_A), field.offered_a)
    if uniform is not None:
        current_a, diode_v, doubt = uniform.columns(part).two_steps(field, start_a, desk)
        return current_a, diode_v, None, None, None if doubt is None else ~doubt  # `mend` settles the rest at once
    field = field.columns(part)
    if not np.any(field.rth > 0):
        law = _ForwardLaw.at(field, field.box_c)
        current_a, diode_v, doubt = law.two_steps(field, start_a)
        return current_a, diode_v, None, None, None if doubt is None else ~doubt
    current_a, diode_v, junction_c = (np.empty(field.shape) for _ in range(3))
    settled = np.zeros(field.shape, dtype=np.bool_)
    left = np.arange(field.shape[0])
    drop_v = dio.forward_drop_v(field.diodes, start_a, field.box_c)
    slope = drop_slope_per_k(field.diodes, drop_v, start_a, field.box_c)
    heat = field.rth * start_a
    t_c = np.minimum(field.box_c + newton_rise(heat * drop_v, heat * slope), DESTROYED_C)
    for _ in range(MAX_TEMPERATURE_PASSES):
        i, v, fine = _ForwardLaw.at(field, t_c).settle(field, start_a, t_c)
        heat = field.rth * i
        off_c = field.box_c + heat * v - t_c
        warm, lost = warmth(t_c, off_c)
        solid = np.True_ if fine is None else fine
        current_a[left], diode_v[left], junction_c[left], settled[left] = i, v, t_c, warm & solid & ~lost
        going = ~np.all(warm | lost | ~solid, axis=1)
        if not going.any():
            break
        slope = drop_slope_per_k(field.diodes, v, i, t_c)
        t_c = np.minimum(t_c + newton_rise(off_c, heat * slope), DESTROYED_C)
        start_a = np.maximum(i, TINY_A)
        if not going.all():
            left, t_c, start_a, field = left[going], t_c[going], start_a[going], field.columns(np.flatnonzero(going))
    return current_a, diode_v, junction_c, None, settled


def mend(field: Field, out: Result, rows: IndexArray, columns: IndexArray) -> None:
    """Settle in one go the cells that the quick steps left open, for rows x columns without self-heating."""
    open_cells = np.flatnonzero(~out.converged[columns])
    if not open_cells.size:
        return
    at, row = np.divmod(open_cells, len(field.bank_v))
    column = columns[at]
    found = _descend(field, column, row, field.box_c[row], out.current_a[column, row])
    for name, values in zip(("current_a", "diode_v", "converged"), found, strict=True):
        getattr(out, name)[column, row] = values


def drop_slope_per_k(
    diodes: DiodeCells, drop_v: FloatArray, current_a: FloatArray, junction_c: FloatArray
) -> FloatArray:
    """Change of the forward drop with temperature at a fixed current, from the law of Is(T)."""
    t_k = junction_c + dio.ZERO_C_K
    junction_v = drop_v - current_a * diodes.series_ohm
    slope = (junction_v - diodes.barrier_ev) / t_k - diodes.temperature_power * dio.BOLTZMANN_EV_PER_K
    return np.asarray(slope + current_a * diodes.series_ohm_per_k)


@dataclass(frozen=True, slots=True, eq=False)
class _ForwardLaw:
    """Junction diodes at one temperature per cell: [D, 1] or [D, T]."""

    n_vt: FloatArray
    is_a: FloatArray
    log_is_v: FloatArray
    inner_ohm: FloatArray
    ohm: FloatArray
    """Everything ohmic, the diode's and the string's own included."""

    @classmethod
    def at(cls, field: Field, junction_c: FloatArray) -> "_ForwardLaw":
        inner_ohm = dio.series_ohm(field.diodes, junction_c)
        string_ohm = field.string.series_ohm
        n_vt = field.diodes.ideality * dio.thermal_voltage_v(junction_c)
        is_a = dio.saturation_a(field.diodes, junction_c)
        ohm = field.ohm + inner_ohm + (string_ohm if junction_c.size > 1 else string_ohm[:1])
        return cls(n_vt, is_a, n_vt * np.log(is_a), inner_ohm, ohm)

    def columns(self, part: slice) -> "_ForwardLaw":
        return _ForwardLaw(*(getattr(self, name)[part] for name in self.__slots__))

    def settle(
        self, field: Field, start_a: FloatArray, junction_c: FloatArray
    ) -> tuple[FloatArray, FloatArray, BoolArray | None]:
        """Current, voltage across the part, and which cells settled (None: all).

        Two quick steps in the current settle nearly every cell, for on the flat of its curve the string hardly notices
        the drop. What they leave in doubt goes to the slower descent that cannot miss.
        """
        current_a, diode_v, doubt = self.two_steps(field, start_a)
        if doubt is None or not doubt.any():
            return current_a, diode_v, None
        settled = np.ones(field.shape, dtype=np.bool_)
        left = np.flatnonzero(doubt)
        columns, rows = np.divmod(left, len(field.bank_v))
        warm_c = np.broadcast_to(junction_c, field.shape)[columns, rows]
        found = _descend(field, columns, rows, warm_c, current_a.reshape(-1)[left])
        for values, mended in zip((current_a, diode_v, settled), found, strict=True):
            values.reshape(-1)[left] = mended
        return current_a, diode_v, settled

    def two_steps(
        self, field: Field, start_a: FloatArray, desk: "_Desk | None" = None
    ) -> tuple[FloatArray, FloatArray, BoolArray | None]:
        """Newton, then a chord, in e = I + Is; with the cells whose remaining imbalance may exceed the tolerance.

        The string's exponential at bank voltage is taken out once per row, which leaves the two drops,
        R·I + nVt·ln(e/Is), for its exponent. What is returned may lie on the desk, until its next use.
        """
        shape = (len(self.n_vt), len(field.bank_v))
        desk = _Desk.of(shape) if desk is None else desk.cut(len(self.n_vt))
        with np.errstate(over="ignore", invalid="ignore"):  # what overflows is in doubt, and goes the other way
            return self._two_steps(field, start_a, desk)

    def _two_steps(
        self, field: Field, start_a: FloatArray, desk: "_Desk"
    ) -> tuple[FloatArray, FloatArray, BoolArray | None]:
        n_vt, is_a, ohm, shunt_s = self.n_vt, self.is_a, self.ohm, field.string.shunt_s
        drop, string_s, slope, e, current_a, diode_v, spare = desk
        # Newton from e = start.
        np.multiply(n_vt, np.log(start_a), out=drop)
        drop += np.multiply(ohm, start_a, out=spare)
        drop -= self.log_is_v + ohm * is_a
        np.multiply(drop, field.per_slope, out=string_s)
        np.exp(string_s, out=string_s)
        string_s *= field.grown_a
        first = drop
        first *= shunt_s
        first += string_s
        first += start_a - field.limit_a
        first -= is_a
        string_s *= field.per_slope
        string_s += shunt_s
        np.multiply(n_vt, 1.0 / start_a, out=slope)
        slope += ohm
        slope *= string_s
        slope += 1.0
        first /= slope
        np.subtract(start_a, first, out=e)
        # The chord: the slope stays, the imbalance is worked out anew.
        np.subtract(e, is_a, out=current_a)
        np.log(e, out=diode_v)
        diode_v *= n_vt
        diode_v -= self.log_is_v
        again = np.multiply(ohm, current_a, out=spare)
        again += diode_v
        second = string_s
        np.multiply(again, field.per_slope, out=second)
        np.exp(second, out=second)
        second *= field.grown_a
        again *= shunt_s
        second += again
        second += current_a
        second -= field.limit_a
        second /= slope
        current_a -= second
        worst = max(float(second.max()), -float(second.min()))
        quick = worst <= QUICK_STEP_A and float(current_a.min()) > QUICK_LEAST_A  # not a number is not quick
        if not quick:
            diode_v -= n_vt * second / e
        diode_v += np.multiply(self.inner_ohm, current_a, out=spare)
        if quick:
            return current_a, diode_v, None
        # A chord shrinks the error by about the ratio of its step to the last, so ~ second²/first is left of it; times
        # the slope that is the imbalance left. Where the step is no small part of the current, none of this holds.
        np.abs(second, out=second)
        sure = second <= 1e-3 * e
        sure &= current_a > 0.0
        np.abs(first, out=first)
        first *= CURRENT_RTOL * current_a + 1e-3 * CURRENT_ATOL_A
        second *= second
        second *= 4.0
        second *= slope
        sure &= second <= first
        return current_a, diode_v, ~sure


class _Desk(tuple[FloatArray, ...]):
    """Seven arrays of a block's shape to compute in, kept from block to block: fresh memory costs as much as sums."""

    __slots__ = ()

    @classmethod
    def of(cls, shape: tuple[int, int]) -> "_Desk":
        return cls(np.empty(shape) for _ in range(7))

    def cut(self, height: int) -> "_Desk":
        """The same arrays for a block that may be lower than the others."""
        return self if height == len(self[0]) else _Desk(array[:height] for array in self)


def _descend(
    field: Field, columns: IndexArray, rows: IndexArray, junction_c: FloatArray, guess_a: FloatArray
) -> tuple[FloatArray, FloatArray, BoolArray]:
    """Newton in the junction voltage, cell by cell: current, voltage across the part, and which cells settled.

    The imbalance falls and is concave, so the first step lands at or above the root and the others come down on it. A
    bound holds that first step: no current exceeds what the string offers through no drop, nor what open-circuit
    voltage drives through the resistance, nor leaves the junction more than the room between bank and open circuit.
    """
    cells = replace(
        field.rows(rows), diodes=field.diodes.take(columns).flat(), ohm=field.ohm[columns, 0], rth=field.rth[columns, 0]
    )
    string, law = cells.string, _ForwardLaw.at(cells, junction_c)
    ohm = cells.ohm + law.inner_ohm + string.series_ohm
    room_v = np.maximum(cells.open_v - cells.bank_v, 0.0)
    limit_a = np.minimum(cells.offered_a, room_v / np.maximum(ohm, 1e-12))
    bound_v = np.minimum(law.n_vt * np.log1p(limit_a / law.is_a), room_v)
    usable = guess_a > 0.0  # not a number is not
    v = np.where(usable, law.n_vt * np.log1p(np.where(usable, guess_a, 0.0) / law.is_a), bound_v)
    v = np.minimum(v, bound_v)
    e = law.is_a * np.exp(v / law.n_vt)
    photo_a = string.photo_a + string.saturation_a
    flat = [photo_a, string.saturation_a, cells.per_slope, string.shunt_s, cells.bank_v, ohm, law.n_vt, law.is_a]
    flat.append(bound_v)
    current_a, diode_v = np.empty_like(v), np.empty_like(v)
    settled = np.ones(v.shape, dtype=np.bool_)
    left = np.arange(v.size)
    for _ in range(MAX_STEPS):
        n_vt, is_a, top_v = flat[6:]
        step = np.minimum(np.maximum(_step_down(flat, v, e), v - top_v), v)
        v = v - step
        x = step / n_vt
        done = x * x * e < LAST_STEP_SHARE * (np.abs(e - is_a) + 1e-6)
        e = np.where(done, e * (1.0 - x + 0.5 * x * x), is_a * np.exp(v / n_vt))
        current_a[left], diode_v[left] = e - is_a, v
        keep = ~done
        left, v, e = left[keep], v[keep], e[keep]
        if not left.size:
            break
        flat = [values[keep] for values in flat]
    settled[left] = False
    return current_a, diode_v + current_a * law.inner_ohm, settled


def _step_down(flat: list[FloatArray], v: FloatArray, e: FloatArray) -> FloatArray:
    """Newton's step down in junction voltage; `e` is the diode's current plus Is, at `v`. All flat."""
    photo_a, string_is_a, per_slope, shunt_s, bank_v, ohm, n_vt, is_a, _ = flat
    current_a = e - is_a
    y = bank_v + v + current_a * ohm
    recombined = string_is_a * np.exp(np.minimum(y * per_slope, 600.0))
    conductance = recombined * per_slope + shunt_s
    excess_a = current_a + recombined + y * shunt_s - photo_a
    diode_s = e / n_vt
    return np.asarray(excess_a / (conductance * (1.0 + diode_s * ohm) + diode_s))
