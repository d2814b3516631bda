"""The loop string -> series diode -> cable -> bank, solved for every time step and diode at once.

Day and night are one equation,  V_string(I) − V_diode(I) − I·R = V_bank,  with a signed current. Its sign is known
beforehand: it is the sign of what the string would offer at bank voltage through no drop at all. So each row of time is
handed to the form of the same equation in which Newton's step cannot go astray:

- current forward, junction diodes: unknown is the diode's junction voltage v. The diode's current is explicit in v, the
  rest of the loop gives the string's junction voltage, and the imbalance is a falling, concave function of v. From a
  start at or above the root Newton therefore comes down on it without ever passing it.
- current forward, no logarithm in the drop (plain wire, perfect valve, active rectifier), and a plain wire backward:
  unknown is the string's junction voltage, kept in the bracket between bank voltage and open circuit.
- current backward: unknown is the reverse voltage u on the diode, kept in its bracket.

The junction's temperature is settled with the loop. What does not settle is NaN with `converged` False.
"""

from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from numpy.typing import NDArray

from server.errors import InputError
from server.physics import diode as dio
from server.physics.diode import DiodeCells, FloatArray
from server.physics.pv import StringCells

BoolArray = NDArray[np.bool_]
IndexArray = NDArray[np.intp]

BLOCK_CELLS = 24_576  # large enough to make Python's cost per block small, small enough for a core's cache
MAX_BLOCK_COLUMNS = 8  # so that the next block's start is never far
MAX_STEPS = 80
MAX_TEMPERATURE_PASSES = 60
CURRENT_ATOL_A = 1e-10
CURRENT_RTOL = 1e-10
JUNCTION_TOLERANCE_C = 1e-3
# One Newton step smaller than this, in units of nVt, leaves an error of half its square: 5e-11 of the current.
LAST_STEP = 1e-5
TINY_A = 1e-15  # a start that still has a logarithm


@dataclass(frozen=True, slots=True, eq=False)
class LoopInput:
    """What `solve` needs: one string in front of each diode.

    string: T rows. diodes: D columns. bank_v: [T] or scalar. ohm: [D] or scalar, everything ohmic outside string and
    diode as one string sees it (a shared cable counts once per string that uses it). box_c: [T] or scalar, air around
    the diode. rth_c_per_w: [D] or scalar, junction to that air; 0 holds the junction at `box_c`. tracks: the bank is
    behind a maximum-power converter wherever that finds more voltage than `bank_v`. strings_per_diode: how many
    strings' current heats one diode.
    """

    string: StringCells
    diodes: DiodeCells
    bank_v: FloatArray | float
    ohm: FloatArray | float
    box_c: FloatArray | float
    rth_c_per_w: FloatArray | float
    tracks: bool = False
    strings_per_diode: float = 1.0


@dataclass(frozen=True, slots=True, eq=False)
class LoopState:
    """The settled loop, one string's share of it; NaN where `converged` is False. Shapes: [T, D].

    Currents are positive from string to bank. The arrays are views whose fast axis is time.
    """

    loop: LoopInput
    current_a: FloatArray
    bus_v: FloatArray
    """Voltage behind the cable: the bank's, or a tracking converter's input while it tracks."""
    diode_v: FloatArray
    """Across the whole part, its series resistance included; negative in reverse."""
    junction_c: FloatArray
    converged: BoolArray

    @property
    def diode_w(self) -> FloatArray:
        """Heat in the diode from one string's current, forward or reverse."""
        return self.current_a * self.diode_v

    @property
    def cable_w(self) -> FloatArray:
        """Heat in everything ohmic outside string and diode."""
        return self.current_a**2 * self.loop.ohm

    @property
    def bus_w(self) -> FloatArray:
        """Power into the bank or the converter; negative when the bank feeds the string."""
        return self.current_a * self.bus_v

    @property
    def string_junction_v(self) -> FloatArray:
        """Junction voltage of the string, by Kirchhoff's law round the loop."""
        inner_ohm = self.loop.string.series_ohm[:, None]
        return np.asarray(self.bus_v + self.diode_v + self.current_a * (self.loop.ohm + inner_ohm))

    @property
    def string_w(self) -> FloatArray:
        """What the string's own law gives at its junction voltage, less the heat in its series resistance."""
        string, y = self.loop.string.column(), self.string_junction_v
        return string.current_a(y) * (y - self.current_a * string.series_ohm)

    @property
    def imbalance_w(self) -> FloatArray:
        """Energy audit: what the string's law gives, less bank, diode and cable. Zero but for rounding."""
        return self.string_w - self.bus_w - self.diode_w - self.cable_w


def solve(loop: LoopInput) -> LoopState:
    """Currents, voltages and junction temperatures of every cell.

    Shapes:  T rows by D columns, see LoopInput.
    Raises:  InputError where a value makes no loop.
    Source:  single-diode string as in Bishop, Solar Cells 25 (1988) 73-89 (from memory).
    """
    rows, columns = len(loop.string), len(loop.diodes)
    bank_v = np.broadcast_to(np.asarray(loop.bank_v, dtype=np.float64), (rows,))
    if not np.all(np.isfinite(bank_v)) or np.any(bank_v < 0):
        raise InputError("battery_v", "every bank voltage must be a number at or above 0 V")
    ohm = np.broadcast_to(np.asarray(loop.ohm, dtype=np.float64), (columns,))
    if not np.all(np.isfinite(ohm)) or np.any(ohm < 0):
        raise InputError("loop_ohm", "every resistance must be a number at or above 0 ohm")
    box_c = np.broadcast_to(np.asarray(loop.box_c, dtype=np.float64), (rows,))
    rth = np.broadcast_to(np.asarray(loop.rth_c_per_w, dtype=np.float64), (columns,)) * loop.strings_per_diode
    field = _Field.of(loop.string, loop.diodes.column(), bank_v, ohm[:, None], box_c, rth[:, None])
    out = _Result.empty(field, heats=bool(np.any(rth > 0)))
    if loop.tracks:
        # A converter that can only step down gives way, cell by cell, where its best input lies under the bank's voltage.
        tracked = _Result.empty(field, heats=True, tracks=True)
        _, best_a = loop.string.max_power(field.open_v)
        _each_block(field, tracked, np.flatnonzero(best_a > 0), np.arange(columns), _tracked_block)
        tracks = (tracked.bus_v >= bank_v) & (best_a > 0)
        _close_through_bank(field, out, np.flatnonzero(~tracks.all(axis=0)))
        out = _Result(*(np.where(tracks, getattr(tracked, name), getattr(out, name)) for name in _STORED))
    else:
        _close_through_bank(field, out, np.arange(rows))
    if not out.converged.all():
        failed = ~out.converged
        out = _Result(*(np.where(failed, np.nan, getattr(out, name)) for name in _STORED[:-1]), out.converged)
    return LoopState(loop, out.current_a.T, out.bus_v.T, out.diode_v.T, out.junction_c.T, out.converged.T)


@dataclass(frozen=True, slots=True, eq=False)
class _Field:
    """Rows of time, arrays [T], against diodes, arrays [D, 1]; and what every block would work out anew from its rows."""

    string: StringCells
    diodes: DiodeCells
    bank_v: FloatArray
    ohm: FloatArray
    box_c: FloatArray
    rth: FloatArray
    open_v: FloatArray
    offered_a: FloatArray
    """What the string would give at bank voltage through no drop at all."""
    per_slope: FloatArray
    grown_a: FloatArray
    limit_a: FloatArray

    @classmethod
    def of(
        cls,
        string: StringCells,
        diodes: DiodeCells,
        bank_v: FloatArray,
        ohm: FloatArray,
        box_c: FloatArray,
        rth: FloatArray,
    ) -> "_Field":
        per_slope = 1.0 / string.slope_v
        return cls(
            string,
            diodes,
            bank_v,
            ohm,
            box_c,
            rth,
            string.open_circuit_v(),
            string.current_a(bank_v),
            per_slope,
            string.saturation_a * np.exp(np.minimum(bank_v * per_slope, 600.0)),
            string.photo_a + string.saturation_a - bank_v * string.shunt_s,
        )

    @property
    def shape(self) -> tuple[int, int]:
        return len(self.ohm), len(self.bank_v)

    def rows(self, part: slice | IndexArray) -> "_Field":
        """The same field for some rows."""
        string = StringCells(*(getattr(self.string, name)[part] for name in StringCells.__slots__))
        kept = {name: getattr(self, name) for name in ("diodes", "ohm", "rth")}
        cut = {name: getattr(self, name)[part] for name in _ROW_FIELDS}
        return _Field(string=string, **kept, **cut)

    def columns(self, part: slice | IndexArray) -> "_Field":
        """The same field for some diodes."""
        return replace(self, diodes=self.diodes.take(part), ohm=self.ohm[part], rth=self.rth[part])


_ROW_FIELDS = ("bank_v", "box_c", "open_v", "offered_a", "per_slope", "grown_a", "limit_a")


@dataclass(frozen=True, slots=True, eq=False)
class _Result:
    """What the solvers fill in, [D, T]: time is the long axis, so it is the contiguous one."""

    current_a: FloatArray
    diode_v: FloatArray
    junction_c: FloatArray
    bus_v: FloatArray
    converged: BoolArray

    @classmethod
    def empty(cls, field: _Field, *, heats: bool, tracks: bool = False) -> "_Result":
        """Room for the answer. What no solver will change is a view of the row it comes from, and takes no memory."""
        shape = field.shape
        bus_v, box_c = np.broadcast_to(field.bank_v, shape), np.broadcast_to(field.box_c, shape)
        current_a, diode_v = np.empty((2, *shape))  # in one piece, for the sake of large pages
        return cls(
            current_a,
            diode_v,
            box_c.copy() if heats else box_c,
            bus_v.copy() if tracks else bus_v,
            np.ones(shape, dtype=np.bool_),
        )


_STORED = ("current_a", "diode_v", "junction_c", "bus_v", "converged")
# The same, as a solver hands them back for one block; None: as `_Result.empty` left it.
_Solved = tuple[FloatArray, FloatArray, FloatArray | None, FloatArray | None, BoolArray | None]
_Solver = Callable[[_Field, FloatArray | None, slice], _Solved]


def _close_through_bank(field: _Field, out: _Result, rows: IndexArray) -> None:
    """The loop closed straight through the bank, for `rows`."""
    forward = field.offered_a[rows] > 0.0
    up, down = rows[forward], rows[~forward]
    ideal, active, blocks = (getattr(field.diodes, name)[:, 0] for name in ("ideal", "active", "blocks"))
    junction = np.flatnonzero(~(ideal | active))
    if up.size and junction.size:
        typical_a, typical_c = float(np.median(field.offered_a[up])), float(np.median(field.box_c[up]))
        drop_v = dio.forward_drop_v(field.diodes, np.array(typical_a), np.array(typical_c)) + typical_a * field.ohm
        order = junction[np.argsort(drop_v[junction, 0], kind="stable")]
        _each_block(field, out, up, order, _forward_block, field.string.current_a(field.bank_v + drop_v[order[0]]))
        if not np.any(field.rth > 0):
            _mend(field, out, up, order)
    _each_block(field, out, up, np.flatnonzero(ideal | active), _dropless_block)
    _each_block(field, out, down, np.flatnonzero(ideal & ~blocks), _dropless_block)
    _each_block(field, out, down, np.flatnonzero(~ideal), _reverse_block)
    for column in np.flatnonzero(ideal & blocks):
        out.current_a[column, down] = 0.0
        out.diode_v[column, down] = field.open_v[down] - field.bank_v[down]


def _each_block(
    field: _Field,
    out: _Result,
    rows: IndexArray,
    columns: IndexArray,
    solver: _Solver,
    start_a: FloatArray | None = None,
) -> None:
    """Run `solver` over `rows` x `columns` in pieces that fit the cache, and store what it finds.

    The solver is told where to begin: at `start_a` ([T]), then at the current of the column before. Columns should
    therefore come sorted by drop.
    """
    if not rows.size or not columns.size:
        return
    # Rows come in long runs (a day, a night): copied run by run, they cost a tenth of scattering them one by one.
    breaks = np.flatnonzero(np.diff(rows) != 1) + 1
    firsts, lasts = np.r_[0, breaks], np.r_[breaks, rows.size]
    chosen = field.columns(columns)
    if rows.size < len(field.bank_v):
        chosen = chosen.rows(rows)
    width = min(rows.size, BLOCK_CELLS)
    height = min(MAX_BLOCK_COLUMNS, max(1, BLOCK_CELLS // width))
    for left in range(0, rows.size, width):
        starts, stops = np.maximum(firsts, left), np.minimum(lasts, left + width)
        runs = [(int(rows[i]), int(i) - left, int(j) - left) for i, j in zip(starts, stops, strict=True) if i < j]
        wide = chosen if width == rows.size else chosen.rows(slice(left, left + width))
        if solver is _forward_block and _is_uniform(wide):
            solver = partial(_forward_block, uniform=_ForwardLaw.at(wide, wide.box_c[:1]))
        before = None if start_a is None else start_a[rows[left : left + width]]
        for top in range(0, columns.size, height):
            part = slice(top, top + height)
            some = columns[part]
            solved = solver(wide.columns(part), before, part)
            before = solved[0][-1]
            for name, values in zip(_STORED, solved, strict=True):
                target = getattr(out, name)
                if values is None or not target.flags.writeable:
                    continue
                for column, kept in zip(some, values, strict=True):
                    line = target[column]
                    for row, i, j in runs:
                        line[row : row + j - i] = kept[i:j]


def _is_uniform(field: _Field) -> bool:
    """Whether one temperature and one string resistance serve all rows, so that a diode's law is worked out once."""
    string_ohm = field.string.series_ohm
    heats = bool(np.any(field.rth > 0))
    return not heats and bool(np.ptp(field.box_c) == 0.0) and bool(np.ptp(string_ohm) == 0.0)


# --- current forward through junction diodes --------------------------------------------------------------------------


def _forward_block(
    field: _Field, before: FloatArray | None, part: slice, uniform: "_ForwardLaw | None" = None
) -> _Solved:
    """Junction diodes under forward current, their temperature settled with it.

    `uniform` is the law of all columns where one temperature serves all rows.
    """
    start_a = field.offered_a if before is None else np.clip(before, TINY_A, field.offered_a)
    if not np.any(field.rth > 0):
        law = _ForwardLaw.at(field, field.box_c) if uniform is None else uniform.columns(part)
        current_a, diode_v, doubt = law.two_steps(field, start_a)
        return current_a, diode_v, None, None, None if doubt is None else ~doubt  # `_mend` settles the rest at once
    diodes = field.diodes
    drop_v = dio.forward_drop_v(diodes, start_a, field.box_c)
    slope = _drop_slope_per_k(diodes, drop_v, start_a, field.box_c)
    heat = field.rth * start_a
    junction_c = field.box_c + _newton_rise(heat * drop_v, heat * slope)
    for _ in range(MAX_TEMPERATURE_PASSES):
        law = _ForwardLaw.at(field, junction_c)
        current_a, diode_v, fine = law.settle(field, start_a, junction_c)
        settled = np.True_ if fine is None else fine
        heat = field.rth * current_a
        off_c = field.box_c + heat * diode_v - junction_c
        warm = np.abs(off_c) < JUNCTION_TOLERANCE_C
        if np.all(warm | ~settled):
            break
        slope = _drop_slope_per_k(diodes, diode_v, current_a, junction_c)
        junction_c = junction_c + _newton_rise(off_c, heat * slope)
        start_a = np.maximum(current_a, TINY_A)
    return current_a, diode_v, junction_c, None, warm & settled


def _mend(field: _Field, out: _Result, rows: IndexArray, columns: IndexArray) -> None:
    """Settle in one go the cells that the quick steps left open, for rows x columns without self-heating."""
    open_cells = np.flatnonzero(~out.converged[columns])
    if not open_cells.size:
        return
    at, row = np.divmod(open_cells, len(field.bank_v))
    column = columns[at]
    found = _descend(field, column, row, field.box_c[row], out.current_a[column, row])
    for name, values in zip(("current_a", "diode_v", "converged"), found, strict=True):
        getattr(out, name)[column, row] = values


def _newton_rise(off_c: FloatArray, rise_slope: FloatArray) -> FloatArray:
    """Newton's correction of a temperature that is `off_c` short, when heat changes by `rise_slope` per degree."""
    return np.asarray(off_c / np.maximum(1.0 - rise_slope, 0.2))


def _drop_slope_per_k(
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
    def at(cls, field: _Field, junction_c: FloatArray) -> "_ForwardLaw":
        inner_ohm = dio.series_ohm(field.diodes, junction_c)
        string_ohm = field.string.series_ohm
        n_vt = field.diodes.ideality * dio.thermal_voltage_v(junction_c)
        is_a = dio.saturation_a(field.diodes, junction_c)
        ohm = field.ohm + inner_ohm + (string_ohm if junction_c.size > 1 else string_ohm[:1])
        return cls(n_vt, is_a, n_vt * np.log(is_a), inner_ohm, ohm)

    def columns(self, part: slice) -> "_ForwardLaw":
        return _ForwardLaw(*(getattr(self, name)[part] for name in self.__slots__))

    def settle(
        self, field: _Field, start_a: FloatArray, junction_c: FloatArray
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

    def two_steps(self, field: _Field, start_a: FloatArray) -> tuple[FloatArray, FloatArray, BoolArray | None]:
        """Newton, then a chord, in e = I + Is; with the cells whose remaining error may exceed the tolerance.

        The string's exponential at bank voltage is taken out once per row, which leaves the two drops,
        R·I + nVt·ln(e/Is), for its exponent. Written in place: on a block this size each pass over memory counts.
        """
        with np.errstate(over="ignore", invalid="ignore"):  # what overflows is in doubt, and goes the other way
            return self._two_steps(field, start_a)

    def _two_steps(self, field: _Field, start_a: FloatArray) -> tuple[FloatArray, FloatArray, BoolArray | None]:
        n_vt, is_a, ohm, shunt_s = self.n_vt, self.is_a, self.ohm, field.string.shunt_s
        # Newton from e = start.
        drop = n_vt * np.log(start_a)
        drop += ohm * start_a
        drop -= self.log_is_v + ohm * is_a
        string_s = drop * field.per_slope
        np.exp(string_s, out=string_s)
        string_s *= field.grown_a
        first = drop
        first *= shunt_s
        first += string_s
        first += start_a - field.limit_a
        first -= is_a
        string_s *= field.per_slope
        string_s += shunt_s
        slope = n_vt * (1.0 / start_a)
        slope += ohm
        slope *= string_s
        slope += 1.0
        first /= slope
        e = start_a - first
        # The chord: the slope stays, the imbalance is worked out anew.
        current_a = e - is_a
        diode_v = np.log(e)
        diode_v *= n_vt
        diode_v -= self.log_is_v
        drop = ohm * current_a
        drop += diode_v
        second = string_s
        np.multiply(drop, field.per_slope, out=second)
        np.exp(second, out=second)
        second *= field.grown_a
        drop *= shunt_s
        second += drop
        second += current_a
        second -= field.limit_a
        second /= slope
        current_a -= second
        worst = max(float(second.max()), -float(second.min()))
        if worst <= CURRENT_ATOL_A:  # not a number fails this too
            diode_v += self.inner_ohm * current_a
            return current_a, diode_v, None
        diode_v -= n_vt * second / e
        diode_v += self.inner_ohm * current_a
        # A chord shrinks the error by about the ratio of its step to the last: remaining ~ second²/first.
        np.abs(first, out=first)
        first *= CURRENT_RTOL * current_a + 0.01 * CURRENT_ATOL_A
        np.abs(second, out=second)
        sure = 4.0 * second * second <= first
        sure &= current_a > 0.0
        sure |= second <= 0.1 * CURRENT_ATOL_A
        return current_a, diode_v, ~sure


def _descend(
    field: _Field, columns: IndexArray, rows: IndexArray, junction_c: FloatArray, guess_a: FloatArray
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
        step = np.minimum(np.maximum(_step_down(*flat[:-1], v, e), v - top_v), v)
        v = v - step
        x = step / n_vt
        done = np.abs(x) < LAST_STEP
        e = np.where(done, e * (1.0 - x + 0.5 * x * x), is_a * np.exp(v / n_vt))
        current_a[left], diode_v[left] = e - is_a, v
        keep = ~done
        left, v, e = left[keep], v[keep], e[keep]
        if not left.size:
            break
        flat = [values[keep] for values in flat]
    settled[left] = False
    return current_a, diode_v + current_a * law.inner_ohm, settled


def _step_down(
    photo_a: FloatArray,
    string_is_a: FloatArray,
    per_slope: FloatArray,
    shunt_s: FloatArray,
    bank_v: FloatArray,
    ohm: FloatArray,
    n_vt: FloatArray,
    is_a: FloatArray,
    v: FloatArray,
    e: FloatArray,
) -> FloatArray:
    """Newton's step down in junction voltage; `e` is the diode's current plus Is, at `v`. All flat."""
    current_a = e - is_a
    y = bank_v + v + current_a * ohm
    recombined = string_is_a * np.exp(np.minimum(y * per_slope, 600.0))
    conductance = recombined * per_slope + shunt_s
    excess_a = current_a + recombined + y * shunt_s - photo_a
    diode_s = e / n_vt
    return np.asarray(excess_a / (conductance * (1.0 + diode_s * ohm) + diode_s))


# --- no logarithm in the drop -----------------------------------------------------------------------------------------


def _dropless_block(field: _Field, _before: FloatArray | None, _part: slice) -> _Solved:
    """Plain wire, perfect valve and active rectifier forward; plain wire backward. Unknown: string junction voltage."""
    string, diodes = field.string, field.diodes
    shape = field.shape
    junction_c = np.broadcast_to(field.box_c, shape).copy()
    low = np.broadcast_to(np.minimum(field.bank_v, field.open_v), shape)
    high = np.broadcast_to(np.maximum(field.bank_v, field.open_v), shape)
    y = low.copy()
    settled = np.zeros(shape, dtype=np.bool_)
    for _ in range(MAX_TEMPERATURE_PASSES):
        inner_ohm = dio.series_ohm(diodes, junction_c)

        def drop(current_a: FloatArray, inner_ohm: FloatArray = inner_ohm) -> tuple[FloatArray, FloatArray]:
            i = np.maximum(current_a, 0.0)
            knee = i + dio.ACTIVE_KNEE_A
            held_v, on_v = diodes.regulated_v * i / knee, inner_ohm * i
            slope = np.where(held_v > on_v, diodes.regulated_v * dio.ACTIVE_KNEE_A / knee**2, inner_ohm)
            return np.where(diodes.active, np.maximum(held_v, on_v), 0.0), np.where(diodes.active, slope, 0.0)

        ohm = field.ohm + string.series_ohm

        def imbalance(y: FloatArray) -> tuple[FloatArray, FloatArray]:
            current_a, conductance = string.current_and_conductance(y)
            drop_v, drop_ohm = drop(current_a)
            # Scaled by the conductance it would otherwise multiply, so that a steep curve does not swamp the step.
            return y - field.bank_v - current_a * ohm - drop_v, 1.0 + conductance * (ohm + drop_ohm)

        y, settled = _bracketed(imbalance, low, high, y, string)
        current_a = string.current_a(y)
        diode_v, _ = drop(current_a)
        # The current is read from the drops, whose rounding is far below the string's steep exponential's.
        off_c = field.box_c + field.rth * current_a * diode_v - junction_c
        if np.all(np.abs(off_c) < JUNCTION_TOLERANCE_C):
            break
        junction_c = junction_c + off_c
    return current_a, diode_v, junction_c, None, settled


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
        allowed_v = (CURRENT_ATOL_A + CURRENT_RTOL * np.abs(current_a)) / conductance
        settled |= (moved < np.maximum(0.1 * allowed_v, 4e-16 * np.abs(y))) | (value == 0)
        if settled.all():
            break
    return y, settled


# --- current backward -------------------------------------------------------------------------------------------------


def _reverse_block(field: _Field, _before: FloatArray | None, _part: slice) -> _Solved:
    """The bank pushes leakage through the fielding diode into the dark string. Unknown: reverse voltage on the diode.

    The junction starts at box temperature and warms until it settles, so of two equilibria it finds the cool one.
    """
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
        law = _ReverseLaw.at(diodes, junction_c)
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
                np.abs(value) < CURRENT_ATOL_A * 0.1 + CURRENT_RTOL * leak_a
            )
            settled |= np.abs(trial - u) <= 2e-16 * np.abs(u)
            u = trial
            if settled.all():
                break
        leak_a, _ = law.current_and_slope(u)
        off_c = field.box_c + field.rth * leak_a * u - junction_c
        warm = np.abs(off_c) < JUNCTION_TOLERANCE_C
        if warm.all():
            break
        # The heat's growth with temperature, were the string to limit nothing; used only while safely stable.
        growth = field.rth * leak_a * u * diodes.leakage_ev / dio.BOLTZMANN_EV_PER_K / (junction_c + dio.ZERO_C_K) ** 2
        junction_c = junction_c + np.where(growth < 0.3, off_c / (1.0 - growth), off_c)
    return -leak_a, -u, junction_c, None, settled & warm


@dataclass(frozen=True, slots=True, eq=False)
class _ReverseLaw:
    """Leakage at one temperature per cell, its temperature factors worked out once for many voltages."""

    share_a: FloatArray
    rest_a: FloatArray
    n_vt: FloatArray
    ref_v: FloatArray
    exponent: FloatArray

    @classmethod
    def at(cls, diodes: DiodeCells, junction_c: FloatArray) -> "_ReverseLaw":
        leakage = diodes.leakage_a * dio.arrhenius_ratio(junction_c, diodes.leakage_ev)
        share = np.minimum(dio.saturation_a(diodes, junction_c), dio.MAX_SATURATION_SHARE * leakage)
        share = np.where(diodes.active, 0.0, share)
        return cls(
            share,
            leakage - share,
            diodes.ideality * dio.thermal_voltage_v(junction_c),
            diodes.leakage_ref_v,
            diodes.leakage_exponent,
        )

    def current_and_slope(self, u: FloatArray) -> tuple[FloatArray, FloatArray]:
        shape, shape_slope = dio.leakage_shape(u, self.ref_v, self.exponent)
        decay = np.exp(-np.minimum(u / self.n_vt, 700.0))
        total = self.share_a * (1.0 - decay) + self.rest_a * shape
        return total, self.share_a / self.n_vt * decay + self.rest_a * shape_slope


# --- behind a maximum-power converter ---------------------------------------------------------------------------------


def _tracked_block(field: _Field, _before: FloatArray | None, _part: slice) -> _Solved:
    """The converter holds its input, BEHIND diode and cable, where the power arriving there is greatest.

    Unknown: string junction voltage y. Power is I·(y − I·R − Vd(I)); its slope falls through zero once.
    """
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
            outside = ~((trial > low) & (trial < high))
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
        if np.all(np.abs(off_c) < JUNCTION_TOLERANCE_C):
            break
        slope_k = _drop_slope_per_k(diodes, diode_v, current_a, junction_c)
        rise_slope = np.where(diodes.active | diodes.ideal, 0.0, field.rth * current_a * slope_k)
        junction_c = junction_c + _newton_rise(off_c, rise_slope)
    bus_v = y - current_a * (field.ohm + string.series_ohm) - diode_v
    return current_a, diode_v, junction_c, bus_v, settled
