"""Arrays -> ticks and path strings that a template can place as SVG. No markup and no colours here."""

import math
from collections.abc import Sequence
from dataclasses import dataclass

from server.selection.result import Candidate, DayTrace
from server.web.words import fixed

WIDTH = 360.0  # a phone's width in CSS pixels, so that text keeps its size where space is scarce


@dataclass(frozen=True, slots=True)
class Tick:
    """A mark on an axis."""

    at: float
    label: str


@dataclass(frozen=True, slots=True)
class Scale:
    """Values to positions, with round ticks."""

    low: float
    high: float
    start: float
    end: float
    step: float

    @classmethod
    def over(cls, low: float, high: float, start: float, end: float, ticks: int = 4) -> "Scale":
        """From at or below `low` to at or above `high`, in steps of 1, 2 or 5."""
        span = high - low if high > low else 1.0
        rough = span / ticks
        power = 10.0 ** math.floor(math.log10(rough))
        step = next(power * m for m in (1.0, 2.0, 5.0, 10.0) if power * m >= rough * (1 - 1e-9))
        return cls(math.floor(low / step + 1e-9) * step, math.ceil(high / step - 1e-9) * step, start, end, step)

    def at(self, value: float) -> float:
        """Position of a value."""
        return round(self.start + (value - self.low) / (self.high - self.low) * (self.end - self.start), 1)

    def ticks(self) -> tuple[Tick, ...]:
        """Round marks from end to end."""
        count = round((self.high - self.low) / self.step)
        places = max(0, -math.floor(math.log10(self.step) + 1e-9))
        values = [self.low + n * self.step for n in range(count + 1)]
        return tuple(Tick(self.at(value), fixed(value, places)) for value in values)


# --- losses by candidate ----------------------------------------------------------------------------------------------

ROW = 38.0
TOP = 30.0
MISSES = (6.0, 232.0)  # from left to right: what the battery misses
HEAT = (250.0, 350.0)  # beside it, on its own scale: the two ledgers are not one
OVER = 3.0  # a candidate this many times beyond the others does not set the scale


@dataclass(frozen=True, slots=True)
class Bar:
    """One candidate: positions along both axes, and the values behind them in Wh a day."""

    label: str
    top: float
    day_x: float
    night_x: float
    maximum_x: float
    over: bool
    """The bar goes on beyond the chart."""
    heat_x: float
    heat_maximum_x: float
    day_wh: float
    night_wh: float
    maximum_wh: float
    heat_wh: float
    heat_maximum_wh: float


@dataclass(frozen=True, slots=True)
class Losses:
    """Two fields of bars side by side, one row per candidate."""

    bars: tuple[Bar, ...]
    misses: tuple[Tick, ...]
    heat: tuple[Tick, ...]
    left: float
    heat_left: float
    height: float
    period: str


def losses(candidates: Sequence[Candidate], period: int, period_name: str) -> Losses:
    """What the battery misses (day and night), and beside it the heat, of one period's mean day."""
    rows = []
    for item in candidates:
        typical, most = item.typical, item.maximum
        day, night = max(typical.day_loss_wh[period], 0.0), max(typical.night_drain_wh[period], 0.0)
        worst = max(most.day_loss_wh[period] + most.night_drain_wh[period], day + night)
        heat, hot = typical.heat_wh[period], most.heat_wh[period]
        if all(math.isfinite(value) for value in (day, night, heat, worst, hot)):
            rows.append((item.title, day, night, worst, heat, max(hot, heat)))
    totals = sorted(row[3] for row in rows)
    top = totals[-1] if totals else 1.0
    if len(totals) > 2 and top > OVER * totals[-2]:
        top = totals[-2]
    across = Scale.over(0.0, max(top, 1e-6), *MISSES)
    warm = Scale.over(0.0, max((row[5] for row in rows), default=1.0) or 1.0, *HEAT, ticks=2)

    def place(value: float) -> float:
        return across.at(min(value, across.high))

    bars = tuple(
        Bar(
            label,
            TOP + ROW * index,
            place(day),
            place(day + night),
            place(worst),
            day + night > across.high,
            warm.at(heat),
            warm.at(hot),
            day,
            night,
            worst,
            heat,
            hot,
        )
        for index, (label, day, night, worst, heat, hot) in enumerate(rows)
    )
    return Losses(bars, across.ticks(), warm.ticks(), MISSES[0], HEAT[0], TOP + ROW * len(bars) + 2.0, period_name)


# --- the day ----------------------------------------------------------------------------------------------------------

PANEL_LEFT, PANEL_RIGHT = 40.0, 352.0
SEEN_FRAC = 0.05
PANEL_HEIGHT, PANEL_GAP, PANEL_TOP = 78.0, 26.0, 20.0


@dataclass(frozen=True, slots=True)
class Panel:
    """One quantity over the day. `zero` is the height of 0, where it lies inside the panel."""

    key: str
    label: str
    unit: str
    top: float
    bottom: float
    path: str
    ticks: tuple[Tick, ...]
    zero: float | None


@dataclass(frozen=True, slots=True)
class Day:
    """Panels above one another over the same hours."""

    title: str
    panels: tuple[Panel, ...]
    hours: tuple[Tick, ...]
    left: float
    right: float
    height: float
    with_diode: bool
    rows: tuple[tuple[str, float, float, float], ...]
    """Time of day, irradiance, current, junction temperature."""


def day(trace: DayTrace, *, with_diode: bool) -> Day:
    """Irradiance, current and (of a diode) junction temperature from midnight to midnight."""
    across = Scale(0.0, 24.0, PANEL_LEFT, PANEL_RIGHT, 6.0)
    panels = []
    series = [
        ("sun", "Light on the module", "W/m²", trace.poa_w_m2),
        ("current", "Current of one string", "A", trace.current_a),
    ]
    if with_diode:
        series.append(("junction", "Junction of the diode", "°C", trace.junction_c))
    for index, (key, label, unit, values) in enumerate(series):
        top = PANEL_TOP + index * (PANEL_HEIGHT + PANEL_GAP)
        known = [value for value in values if math.isfinite(value)] or [0.0]
        low = min(known)
        if key != "junction" and low > -SEEN_FRAC * max(known):
            low = 0.0  # what flows back at night is far too little to be seen here
        scale = Scale.over(low, max(*known, low + 1e-6), top + PANEL_HEIGHT, top, 3)
        zero = scale.at(0.0) if scale.low <= 0.0 <= scale.high else None
        path = _path([across.at(hour) for hour in trace.solar_hour], values, scale)
        panels.append(Panel(key, label, unit, top, top + PANEL_HEIGHT, path, scale.ticks(), zero))
    hours = tuple(Tick(across.at(hour), f"{hour:g} h") for hour in (0.0, 6.0, 12.0, 18.0, 24.0))
    rows = tuple(
        (f"{int(hour):02d}:{round(60 * (hour % 1)):02d}", light, amps, hot)
        for hour, light, amps, hot in zip(
            trace.solar_hour, trace.poa_w_m2, trace.current_a, trace.junction_c, strict=True
        )
    )
    bottom = panels[-1].bottom
    return Day(trace.title, tuple(panels), hours, PANEL_LEFT, PANEL_RIGHT, bottom + 22.0, with_diode, rows)


def _path(xs: Sequence[float], values: Sequence[float], scale: Scale) -> str:
    """A line that is broken where a value is missing."""
    words, lifted = [], True
    for x, value in zip(xs, values, strict=True):
        if not math.isfinite(value):
            lifted = True
            continue
        words.append(f"{'M' if lifted else 'L'}{x:g} {scale.at(value):g}")
        lifted = False
    return "".join(words)
