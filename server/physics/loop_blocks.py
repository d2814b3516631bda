"""The loop's cells, cut into blocks: rows of time against diodes, in pieces that fit a core's cache."""

from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from server.physics.diode import DiodeCells, FloatArray
from server.physics.pv import StringCells

BoolArray = NDArray[np.bool_]
IndexArray = NDArray[np.intp]

# Large enough that Python's cost per block is small, small enough for a core's cache.
BLOCK_CELLS = 40_960
MAX_BLOCK_COLUMNS = 10  # so that the next block's start is never far
MAX_STEPS = 80
MAX_TEMPERATURE_PASSES = 40
CURRENT_ATOL_A = 1e-10
CURRENT_RTOL = 1e-10
JUNCTION_TOLERANCE_C = 1e-8  # leakage moves by a tenth per degree: this holds it to 1e-9
# No junction lives at this temperature and no law holds there: the cell is given up, and marked.
DESTROYED_C = 400.0


@dataclass(frozen=True, slots=True, eq=False)
class Field:
    """Rows of time, arrays [T], against diodes, arrays [D, 1]; and what blocks would work out from rows anew."""

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
    ) -> "Field":
        """The field of a loop; rows [T], diodes [D, 1]."""
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
        """Diodes by rows."""
        return len(self.ohm), len(self.bank_v)

    def rows(self, part: slice | IndexArray) -> "Field":
        """The same field for some rows."""
        string = StringCells(*(getattr(self.string, name)[part] for name in StringCells.__slots__))
        kept = {name: getattr(self, name) for name in ("diodes", "ohm", "rth")}
        cut = {name: getattr(self, name)[part] for name in _ROW_FIELDS}
        return Field(string=string, **kept, **cut)

    def columns(self, part: slice | IndexArray) -> "Field":
        """The same field for some diodes."""
        return replace(self, diodes=self.diodes.take(part), ohm=self.ohm[part], rth=self.rth[part])


_ROW_FIELDS = ("bank_v", "box_c", "open_v", "offered_a", "per_slope", "grown_a", "limit_a")


@dataclass(frozen=True, slots=True, eq=False)
class Result:
    """What the solvers fill in, [D, T]: time is the long axis, so it is the contiguous one."""

    current_a: FloatArray
    diode_v: FloatArray
    junction_c: FloatArray
    bus_v: FloatArray
    converged: BoolArray

    @classmethod
    def empty(cls, field: Field, *, heats: bool, tracks: bool = False) -> "Result":
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


STORED = ("current_a", "diode_v", "junction_c", "bus_v", "converged")
# The same, as a solver hands them back for one block; None: as `Result.empty` left it.
Solved = tuple[FloatArray, FloatArray, FloatArray | None, FloatArray | None, BoolArray | None]
Solver = Callable[[Field, FloatArray | None, slice], Solved]


def each_block(
    field: Field,
    out: Result,
    rows: IndexArray,
    columns: IndexArray,
    solver_for: Callable[[Field], Solver],
    start_a: FloatArray | None = None,
) -> None:
    """Run a solver over `rows` x `columns` in pieces that fit the cache, and store what it finds.

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
        solver = solver_for(wide)
        before = None if start_a is None else start_a[rows[left : left + width]]
        for top in range(0, columns.size, height):
            part = slice(top, top + height)
            some = columns[part]
            solved = solver(wide, before, part)
            before = solved[0][-1]
            for name, values in zip(STORED, solved, strict=True):
                if values is None:
                    continue
                target = getattr(out, name)
                if not target.flags.writeable:
                    continue
                for column, kept in zip(some, values, strict=True):
                    line = target[column]
                    for row, i, j in runs:
                        line[row : row + j - i] = kept[i:j]


def warmth(junction_c: FloatArray, off_c: FloatArray) -> tuple[BoolArray, BoolArray]:
    """Which junctions have settled, and which are past saving (not a number is past saving too)."""
    return np.abs(off_c) < JUNCTION_TOLERANCE_C, ~(junction_c + off_c < DESTROYED_C)


def newton_rise(off_c: FloatArray, rise_slope: FloatArray) -> FloatArray:
    """Newton's correction of a temperature that is `off_c` short, when heat changes by `rise_slope` per degree."""
    return np.asarray(off_c / np.maximum(1.0 - rise_slope, 0.2))
