"""Curves of one part, both corners: sampled from its laws, drawn, and told as tables."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from server.catalog.part import Part
from server.physics.diode import ActiveLaw, DiodeCells, FloatArray, forward_drop_v, reverse_a
from server.web import curves
from server.web.charts import Scale
from server.web.curves import Axis, Chart, LogScale, Printed, Series
from server.web.diode_words import LEAST_TOLD_A, amps, amps_span
from server.web.printed import Point
from server.web.shelf import quoted_current_a
from server.web.words import DASH, fig, given

JUNCTIONS_C = (0.0, 25.0, 60.0, 100.0)
BANKS_V = (13.0, 26.0, 52.0)  # banks of 12, 24 and 48 V at night
OVER_C = (-20.0, 100.0)
NIGHTS_C = (0.0, 10.0, 25.0, 35.0)
NIGHT_H = 12.0
CURVE_POINTS = 49
LOWEST_SEEN_V = 1.0
LEAST_TOLD_MAH = 1e-3
DECADES_DRAWN = 2.5  # of current below the rating, at least
NEAR_FRAC = 0.005  # currents nearer than this to the rating are the rating
NBSP = "\N{NO-BREAK SPACE}"


@dataclass(frozen=True, slots=True)
class Table:
    """The figures behind a chart: one row per value of `head`, one pair typical, maximum per column."""

    head: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, tuple[str, ...]], ...]


@dataclass(frozen=True, slots=True, eq=False)
class Sampled:
    """A quantity of both corners: [argument, curve] each."""

    x: FloatArray
    curves: tuple[float, ...]
    typical: FloatArray
    maximum: FloatArray

    def series(self, keys: Sequence[str], labels: Sequence[str]) -> list[Series]:
        """Its curves, maxima first so that the typical lie above."""
        found = []
        for maximum, values in ((True, self.maximum), (False, self.typical)):
            for index, (key, label) in enumerate(zip(keys, labels, strict=True)):
                found.append(Series(key, label, maximum, self.x.tolist(), values[:, index].tolist()))
        return found

    def all(self) -> list[float]:
        """Every value."""
        return [*self.typical.ravel().tolist(), *self.maximum.ravel().tolist()]


def _both(part: Part) -> tuple[DiodeCells, DiodeCells]:
    return DiodeCells.of([part.typical]), DiodeCells.of([part.maximum])


def drops(part: Part, current_a: FloatArray) -> Sampled:
    """Forward drop of one leg at each current and each of JUNCTIONS_C."""
    at_c = np.array([JUNCTIONS_C])
    typical, maximum = (forward_drop_v(cells, current_a[:, None], at_c) for cells in _both(part))
    return Sampled(current_a, JUNCTIONS_C, typical, maximum)


def leaks(part: Part, volts: FloatArray) -> Sampled:
    """Leakage of one leg at each reverse voltage and each of JUNCTIONS_C."""
    at_c = np.array([JUNCTIONS_C])
    typical, maximum = (reverse_a(cells, volts[:, None], at_c) for cells in _both(part))
    return Sampled(volts, JUNCTIONS_C, typical, maximum)


def leaks_over_temperature(part: Part, at_c: FloatArray) -> Sampled:
    """Leakage of one leg at each temperature and each of BANKS_V that it can bear."""
    volts = tuple(volt for volt in BANKS_V if volt <= part.vrrm_v)
    typical, maximum = (reverse_a(cells, np.array([volts]), at_c[:, None]) for cells in _both(part))
    return Sampled(at_c, volts, typical, maximum)


def currents(part: Part) -> tuple[float, float]:
    """From where to where the drop is drawn: two and a half decades up to beyond the rating, all printed points in."""
    printed = [p.current_a for sheet in part.sheets for p in sheet.forward]
    rated = quoted_current_a(part)
    top = max(1.5 * rated, 1.1 * max(printed, default=rated))
    return min(rated / 10**DECADES_DRAWN, 0.9 * min(printed, default=rated)), top


def _round_values(low: float, high: float, steps: Sequence[float] = (1.0, 2.0, 5.0)) -> FloatArray:
    """1, 2, 5 and their decades inside a range."""
    first, last = math.floor(math.log10(low)), math.ceil(math.log10(high))
    values = [m * 10.0**p for p in range(first, last + 1) for m in steps]
    return np.array([value for value in values if low * (1 - 1e-9) <= value <= high * (1 + 1e-9)])


# --- figures ----------------------------------------------------------------------------------------------------------


def _table(head: str, columns: Sequence[str], names: Sequence[str], sampled: Sampled, *, volts: bool) -> Table:
    rows = []
    for name, typical, maximum in zip(names, sampled.typical, sampled.maximum, strict=True):
        cells = []
        for low, high in zip(typical.tolist(), maximum.tolist(), strict=True):
            first, last = fig(low, 3), fig(high, 3)
            cells.append((first if first == last else f"{first}{DASH}{last}") if volts else amps_span(low, high))
        rows.append((name, tuple(cells)))
    return Table(head, tuple(columns), tuple(rows))


@dataclass(frozen=True, slots=True)
class Figure:
    """A chart, and its figures."""

    chart: Chart
    table: Table
    note: str = ""


T_KEYS = ("t0", "t25", "t60", "t100")
T_LABELS = tuple(f"{c:g} °C" for c in JUNCTIONS_C)
V_KEYS = {13.0: "v13", 26.0: "v26", 52.0: "v52"}


def _printed(points: Sequence[Point], quantity: str) -> list[Printed]:
    unit, of = ("A", "V") if quantity == "forward" else ("V", "A")
    return [
        Printed(
            p.at,
            p.printed,
            p.kind,
            f"{p.junction_c:g}°" if p.junction_c is not None else "?",
            f"printed {'typical' if p.kind == 'typ' else 'maximum'}: "
            f"{amps(p.printed) if of == 'A' else f'{given(p.printed)} V'} at {given(p.at)} {unit}"
            + (f", {p.junction_c:g} °C" if p.junction_c is not None else ""),
        )
        for p in points
        if p.quantity == quantity
    ]


def drop_figure(part: Part, points: Sequence[Point], drawn: Sampled) -> Figure:
    """Forward drop against current, its printed points, and its figures."""
    low, high = currents(part)
    marks = _printed(points, "forward")
    top = max([value for value in drawn.all() if math.isfinite(value)] + [m.y for m in marks])

    def axes(x0: float, x1: float, y0: float, y1: float) -> tuple[Axis, Axis]:
        return LogScale(low, high, x0, x1, "A"), Scale.over(0.0, top, y0, y1, 5)

    rated = quoted_current_a(part)
    values = _round_values(low, high, (1.0, 3.0))
    values = np.unique(np.append(values[np.abs(values / rated - 1) > NEAR_FRAC], rated))
    leg = " of one leg" if part.dies > 1 else ""
    return Figure(
        curves.chart(
            "drop",
            f"Forward drop of {part.type} against current",
            f"From {amps(low)} to {amps(high)}{leg}, at junctions of 0, 25, 60 and 100 °C; typical solid, maximum "
            "dashed. The table below holds the figures.",
            ("Forward current" + leg, "Drop, V"),
            axes,
            drawn.series(T_KEYS, T_LABELS),
            marks,
            named_at="right" if isinstance(part.typical, ActiveLaw) else "left",  # where the lines lie apart
        ),
        _table("Current", T_LABELS, [f"{given(value)} A" for value in values], drops(part, values), volts=True),
    )


def _below(drawn: Sampled) -> str:
    return "Below 1 pA nothing is drawn." if min(drawn.all()) < LEAST_TOLD_A else ""


def leak_figure(part: Part, points: Sequence[Point], drawn: Sampled) -> Figure:
    """Leakage against reverse voltage, its printed points, and its figures."""
    marks = _printed(points, "reverse")

    def axes(x0: float, x1: float, y0: float, y1: float) -> tuple[Axis, Axis]:
        up = LogScale.around([*drawn.all(), *(m.y for m in marks)], y0, y1, "A", LEAST_TOLD_A)
        return LogScale(LOWEST_SEEN_V, part.vrrm_v, x0, x1, "V"), up

    banks = [volt for volt in BANKS_V if volt <= part.vrrm_v]
    values = np.unique([*_round_values(LOWEST_SEEN_V, part.vrrm_v, (1.0, 5.0)), *banks, part.vrrm_v])
    leg = " of one leg" if part.dies > 1 else ""
    return Figure(
        curves.chart(
            "leakage",
            f"Leakage of {part.type} against reverse voltage",
            f"From 1 V to its rating of {given(part.vrrm_v)} V{leg}, at junctions of 0, 25, 60 and 100 °C; typical "
            "solid, maximum dashed. The table below holds the figures.",
            ("Reverse voltage", "Leakage" + leg),
            axes,
            drawn.series(T_KEYS, T_LABELS),
            marks,
            end=f"{given(part.vrrm_v)}{NBSP}V",
        ),
        _table("Reverse voltage", T_LABELS, [f"{given(v)} V" for v in values], leaks(part, values), volts=False),
        _below(drawn),
    )


def heat_figure(part: Part, drawn: Sampled) -> Figure:
    """Leakage against junction temperature, and its figures."""
    labels = [f"{volt:g} V" for volt in drawn.curves]

    def axes(x0: float, x1: float, y0: float, y1: float) -> tuple[Axis, Axis]:
        return Scale(*OVER_C, x0, x1, 20.0), LogScale.around(drawn.all(), y0, y1, "A", LEAST_TOLD_A)

    leg = " of one leg" if part.dies > 1 else ""
    values = np.arange(OVER_C[0], OVER_C[1] + 1, 20.0)
    return Figure(
        curves.chart(
            "heat",
            f"Leakage of {part.type} against junction temperature",
            f"From −20 to 100 °C{leg}, at {' and '.join(labels)}; typical solid, maximum dashed. The table below "
            "holds the figures.",
            ("Junction temperature, °C", "Leakage" + leg),
            axes,
            drawn.series([V_KEYS[volt] for volt in drawn.curves], labels),
        ),
        _table(
            "Junction",
            labels,
            [f"{given(value)} °C" for value in values],
            leaks_over_temperature(part, values),
            volts=False,
        ),
        _below(drawn),
    )


def nights(part: Part) -> Sampled:
    """Charge in Ah through one leg in a night of 12 h, if the whole voltage of the bank stands across it."""
    leak = leaks_over_temperature(part, np.array(NIGHTS_C))
    return Sampled(leak.x, leak.curves, NIGHT_H * leak.typical, NIGHT_H * leak.maximum)


def night_table(sampled: Sampled) -> Table:
    """The same in mAh, in words."""

    def told(value: float) -> str:
        return f"< {LEAST_TOLD_MAH:g}" if value < LEAST_TOLD_MAH else fig(value, 2)

    rows = []
    for at_c, typical, maximum in zip(NIGHTS_C, sampled.typical, sampled.maximum, strict=True):
        cells = []
        for low, high in zip((1e3 * typical).tolist(), (1e3 * maximum).tolist(), strict=True):
            first, last = told(low), told(high)
            cells.append(
                first if first == last else f"{first}{DASH}{last}" if first[0] != "<" else f"{first} to {last}"
            )
        rows.append((f"{at_c:g} °C", tuple(cells)))
    return Table("Junction", tuple(f"{volt:g} V" for volt in sampled.curves), tuple(rows))
