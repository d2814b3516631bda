"""Charts of one diode: laws -> lines, printed points -> marks, on logarithmic axes. No markup and no colours here."""

import math
from collections.abc import Callable, Iterable, Sequence
from dataclasses import dataclass

from server.web.charts import Scale, Tick

LEFT, RIGHT, TOP, BOTTOM = 46.0, 352.0, 24.0, 236.0
LINE_APART = 11.0  # labels of lines stand at least a line of text apart
LABELS_RIGHT, LABELS_LEFT = 44.0, 46.0  # room beside the lines for their names
PREFIXES = {-12: "p", -9: "n", -6: "µ", -3: "m", 0: "", 3: "k"}
DECADES_LABELLED = 9
END_APART = 30.0  # the end of an axis has its figure where the next decade's leaves room


def decade(power: int, unit: str) -> str:
    """A power of ten as the trade writes it: 10 nA, 1 µA, 100 mA, 10 A."""
    group = min(max(3 * math.floor(power / 3), min(PREFIXES)), max(PREFIXES))
    return f"{10.0 ** (power - group):g}\N{NO-BREAK SPACE}{PREFIXES[group]}{unit}"


@dataclass(frozen=True, slots=True)
class LogScale:
    """Values above 0 to positions, with a tick at each decade."""

    low: float
    high: float
    start: float
    end: float
    unit: str

    @classmethod
    def around(cls, values: Iterable[float], start: float, end: float, unit: str, least: float = 0.0) -> "LogScale":
        """From whole decade to whole decade around the values above `least`, at least one decade."""
        known = [value for value in values if math.isfinite(value) and value > least] or [1.0]
        low = math.floor(math.log10(min(known)) + 1e-9)
        high = max(math.ceil(math.log10(max(known)) - 1e-9), low + 1)
        return cls(10.0**low, 10.0**high, start, end, unit)

    def at(self, value: float) -> float:
        """Position of a value."""
        share = math.log(value / self.low) / math.log(self.high / self.low)
        return round(self.start + share * (self.end - self.start), 1)

    def holds(self, value: float) -> bool:
        """Whether a value lies on the axis."""
        return math.isfinite(value) and self.low * (1 - 1e-9) <= value <= self.high * (1 + 1e-9)

    def ticks(self) -> tuple[Tick, ...]:
        """Every decade; where they are many, every other one has its figure."""
        first = math.ceil(math.log10(self.low) - 1e-9)
        last = math.floor(math.log10(self.high) + 1e-9)
        every = 1 + (last - first) // DECADES_LABELLED
        return tuple(
            Tick(self.at(10.0**p), decade(p, self.unit) if (p - first) % every == 0 else "")
            for p in range(first, last + 1)
        )

    def between(self) -> tuple[float, ...]:
        """Positions of 2 and 5 in each decade, for fine lines."""
        first, last = math.floor(math.log10(self.low) + 1e-9), math.ceil(math.log10(self.high) - 1e-9)
        values = [m * 10.0**p for p in range(first, last) for m in (2.0, 5.0)]
        return tuple(self.at(value) for value in values if self.holds(value))


Axis = Scale | LogScale


@dataclass(frozen=True, slots=True)
class Series:
    """One curve to be drawn: `key` picks its colour, `label` names the typical line at its end."""

    key: str
    label: str
    maximum: bool
    x: Sequence[float]
    y: Sequence[float]


@dataclass(frozen=True, slots=True)
class Printed:
    """One printed point to be marked."""

    x: float
    y: float
    kind: str
    label: str
    title: str


@dataclass(frozen=True, slots=True)
class Line:
    """A curve, placed."""

    key: str
    maximum: bool
    path: str


@dataclass(frozen=True, slots=True)
class Name:
    """A text, placed."""

    key: str
    text: str
    x: float
    y: float


@dataclass(frozen=True, slots=True)
class Mark:
    """A printed point, placed: a ring for a typical value, a triangle for a maximum; no label without room for it."""

    path: str
    kind: str
    title: str
    label: str
    x: float
    y: float


@dataclass(frozen=True, slots=True)
class Chart:
    """Everything that a template places."""

    key: str
    title: str
    told: str
    x_name: str
    y_name: str
    x_ticks: tuple[Tick, ...]
    y_ticks: tuple[Tick, ...]
    x_fine: tuple[float, ...]
    y_fine: tuple[float, ...]
    lines: tuple[Line, ...]
    names: tuple[Name, ...]
    marks: tuple[Mark, ...]
    kinds: tuple[str, ...]
    """Kinds among the marks."""
    left: float = LEFT
    right: float = RIGHT
    top: float = TOP
    bottom: float = BOTTOM


def chart(
    key: str,
    title: str,
    told: str,
    names: tuple[str, str],
    axes: Callable[[float, float, float, float], tuple[Axis, Axis]],
    series: Sequence[Series],
    printed: Sequence[Printed] = (),
    *,
    named_at: str = "right",
    end: str = "",
) -> Chart:
    """Lines, marks and ticks of one chart.

    `axes` makes both axes for the room left beside the lines' names: x from, x to, y from (below), y to (above).
    `end` is the figure at the end of a logarithmic x axis.
    """
    inner = (LEFT, RIGHT - LABELS_RIGHT) if named_at == "right" else (LEFT + LABELS_LEFT, RIGHT)
    drawn, up = axes(*inner, BOTTOM, TOP)
    x_ticks = drawn.ticks()
    if end and inner[1] - x_ticks[-1].at > END_APART:
        x_ticks += (Tick(inner[1], end),)
    lines = tuple(Line(one.key, one.maximum, path(one.x, one.y, drawn, up)) for one in series)
    return Chart(
        key=key,
        title=title,
        told=told,
        x_name=names[0],
        y_name=names[1],
        x_ticks=x_ticks,
        y_ticks=up.ticks(),
        x_fine=drawn.between() if isinstance(drawn, LogScale) else (),
        y_fine=up.between() if isinstance(up, LogScale) and len(up.ticks()) < 6 else (),
        lines=lines,
        names=_line_names(series, drawn, up, named_at),
        marks=_marks(printed, drawn, up),
        kinds=tuple(sorted({point.kind for point in printed})),
    )


def path(xs: Sequence[float], ys: Sequence[float], across: Axis, up: Axis) -> str:
    """A line, broken where a value has no place on the axes."""
    words, lifted = [], True
    for x, y in zip(xs, ys, strict=True):
        if not (math.isfinite(x) and math.isfinite(y)) or (isinstance(up, LogScale) and y < up.low * (1 - 1e-9)):
            lifted = True
            continue
        words.append(f"{'M' if lifted else 'L'}{across.at(x):g} {up.at(y):g}")
        lifted = False
    return "".join(words)


def _line_names(series: Sequence[Series], across: Axis, up: Axis, named_at: str) -> tuple[Name, ...]:
    """The typical lines' names beside their ends, moved apart where they would meet."""
    end = -1 if named_at == "right" else 0
    wanted = []
    for one in series:
        y = one.y[end]
        if not one.maximum and math.isfinite(y) and not (isinstance(up, LogScale) and y < up.low):
            wanted.append((up.at(y), one))
    wanted.sort(key=lambda item: item[0])
    heights: list[float] = []
    for y, _ in wanted:
        heights.append(max(y, heights[-1] + LINE_APART) if heights else max(y, TOP + 4))
    over = max(0.0, heights[-1] - BOTTOM + 4) if heights else 0.0
    for index in range(len(heights) - 1, -1, -1):  # what was pushed below the axis is pushed back up
        ceiling = heights[index + 1] - LINE_APART if index + 1 < len(heights) else BOTTOM - 4
        heights[index] = min(heights[index], ceiling) if over else heights[index]
    x = RIGHT - LABELS_RIGHT + 4 if named_at == "right" else LEFT + LABELS_LEFT - 4
    return tuple(Name(one.key, one.label, x, round(y + 4, 1)) for (_, one), y in zip(wanted, heights, strict=True))


PLACES = ((6, 3.5), (-6, 3.5), (0, -6), (0, 13), (6, -5), (6, 12), (-6, -5), (-6, 12))
CHARACTER, LINE_HEIGHT = 5.2, 9.0


def _marks(printed: Sequence[Printed], across: Axis, up: Axis) -> tuple[Mark, ...]:
    """A mark for each point, and its label where there is room for it."""
    places = [
        (across.at(p.x), up.at(p.y), p)
        for p in printed
        if (not isinstance(across, LogScale) or across.holds(p.x)) and (not isinstance(up, LogScale) or up.holds(p.y))
    ]
    taken = [(x - 4, y - 4, x + 4, y + 4) for x, y, _ in places]
    found = []
    for x, y, point in places:
        shape = (
            f"M{x - 4:g} {y + 3.2:g}h8L{x:g} {y - 4:g}Z"
            if point.kind == "max"
            else f"M{x - 3.5:g} {y:g}a3.5 3.5 0 1 0 7 0a3.5 3.5 0 1 0 -7 0Z"
        )
        label, at = "", (x, y)
        for dx, dy in PLACES:
            wide = CHARACTER * len(point.label)
            left = x + dx - (wide if dx < 0 else wide / 2 if dx == 0 else 0)
            box = (left, y + dy - LINE_HEIGHT + 1, left + wide, y + dy)
            inside = box[0] > LEFT and box[2] < RIGHT and box[1] > TOP - 4 and box[3] < BOTTOM
            if inside and not any(_meet(box, other) for other in taken):
                label, at = point.label, (round(left, 1), round(y + dy, 1))
                taken.append(box)
                break
        found.append(Mark(shape, point.kind, point.title, label, *at))
    return tuple(found)


Box = tuple[float, float, float, float]


def _meet(one: Box, other: Box) -> bool:
    return one[0] < other[2] and other[0] < one[2] and one[1] < other[3] and other[1] < one[3]
