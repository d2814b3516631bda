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

from dataclasses import dataclass

import numpy as np

from server.errors import InputError
from server.physics import diode as dio
from server.physics.diode import DiodeCells, FloatArray
from server.physics.loop_blocks import STORED, BoolArray, Field, IndexArray, Result, each_block
from server.physics.loop_dropless import dropless_block, reverse_block
from server.physics.loop_forward import forward_solver, mend
from server.physics.loop_tracked import tracked_block
from server.physics.pv import StringCells


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
    field = Field.of(loop.string, loop.diodes.column(), bank_v, ohm[:, None], box_c, rth[:, None])
    out = Result.empty(field, heats=bool(np.any(rth > 0)))
    if loop.tracks:
        # A converter that only steps down gives way, cell by cell, where its best input lies under the bank's voltage.
        tracked = Result.empty(field, heats=True, tracks=True)
        _, best_a = loop.string.max_power(field.open_v)
        each_block(field, tracked, np.flatnonzero(best_a > 0), np.arange(columns), lambda _: tracked_block)
        tracks = (tracked.bus_v >= bank_v) & (best_a > 0)
        _close_through_bank(field, out, np.flatnonzero(~tracks.all(axis=0)))
        out = Result(*(np.where(tracks, getattr(tracked, name), getattr(out, name)) for name in STORED))
    else:
        _close_through_bank(field, out, np.arange(rows))
    if not out.converged.all():
        failed = ~out.converged
        lost = {name: np.where(failed, np.nan, getattr(out, name)) for name in STORED[:-1]}
        out = Result(**lost, converged=out.converged)
    return LoopState(loop, out.current_a.T, out.bus_v.T, out.diode_v.T, out.junction_c.T, out.converged.T)


def _close_through_bank(field: Field, out: Result, rows: IndexArray) -> None:
    """The loop closed straight through the bank, for `rows`."""
    forward = field.offered_a[rows] > 0.0
    up, down = rows[forward], rows[~forward]
    ideal, active, blocks = (getattr(field.diodes, name)[:, 0] for name in ("ideal", "active", "blocks"))
    junction = np.flatnonzero(~(ideal | active))
    if up.size and junction.size:
        typical_a, typical_c = float(np.median(field.offered_a[up])), float(np.median(field.box_c[up]))
        drop_v = dio.forward_drop_v(field.diodes, np.array(typical_a), np.array(typical_c)) + typical_a * field.ohm
        order = junction[np.argsort(drop_v[junction, 0], kind="stable")]
        each_block(field, out, up, order, forward_solver, field.string.current_a(field.bank_v + drop_v[order[0]]))
        if not np.any(field.rth > 0):
            mend(field, out, up, order)
    each_block(field, out, up, np.flatnonzero(ideal | active), lambda _: dropless_block)
    each_block(field, out, down, np.flatnonzero(ideal & ~blocks), lambda _: dropless_block)
    each_block(field, out, down, np.flatnonzero(~ideal), lambda _: reverse_block)
    for column in np.flatnonzero(ideal & blocks):
        out.current_a[column, down] = 0.0
        out.diode_v[column, down] = field.open_v[down] - field.bank_v[down]
