"""Every printed point of a type, once, with the sheets that print it; ours beside it."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from server.catalog.datasheet import ForwardPoint, ReversePoint, Sheet
from server.catalog.part import Part
from server.physics.diode import DiodeCells, forward_drop_v, reverse_a
from server.web.words import NO_NUMBER, fig


@dataclass(frozen=True, slots=True)
class Point:
    """A printed point and the sheets that print it, beside ours. `ours` is None where no junction is printed."""

    quantity: str
    at: float
    junction_c: float | None
    kind: str
    printed: float
    ours: float | None
    sheets: tuple[int, ...]
    """Numbers of the sheets, from 1, in the order listed."""
    others: bool
    """Another sheet prints a different value for the same condition."""

    @property
    def misfit(self) -> str:
        """Ours less print in millivolts, or ours over print as a factor."""
        if self.ours is None:
            return NO_NUMBER
        if self.quantity == "reverse":
            return f"× {fig(self.ours / self.printed, 3)}"
        off_mv = 1e3 * (self.ours - self.printed)
        return f"{'+' if round(off_mv, 1) > 0 else ''}{fig(round(off_mv, 1), 2)} mV"


def _ours(part: Part, point: ForwardPoint | ReversePoint) -> float | None:
    if part.fit is None or point.junction_c is None:
        return None
    cells = DiodeCells.of([part.typical if point.kind == "typ" else part.maximum])
    at_c = np.array(point.junction_c)
    if isinstance(point, ForwardPoint):
        return float(forward_drop_v(cells, np.array(point.current_a), at_c)[0])
    return float(reverse_a(cells, np.array(point.reverse_v), at_c)[0])


def printed_points(sheets: Sequence[Sheet], part: Part | None) -> tuple[Point, ...]:
    """Every printed point once, with all sheets that print it; unlike values for one condition stand together."""
    found: dict[tuple[str, float, float | None, str], dict[float, tuple[list[int], float | None]]] = {}
    for number, sheet in enumerate(sheets, 1):
        both: tuple[ForwardPoint | ReversePoint, ...] = (*sheet.forward, *sheet.reverse)
        for point in both:
            if isinstance(point, ForwardPoint):
                quantity, at, value = "forward", point.current_a, point.voltage_v
            else:
                quantity, at, value = "reverse", point.reverse_v, point.current_a
            condition = (quantity, at, point.junction_c, point.kind)
            values = found.setdefault(condition, {})
            if value not in values:
                values[value] = ([], _ours(part, point) if part else None)
            if number not in values[value][0]:
                values[value][0].append(number)
    order = sorted(found, key=lambda c: (c[0], -1e3 if c[2] is None else c[2], c[1], c[3] == "max"))
    return tuple(
        Point(*condition, value, ours, tuple(numbers), len(found[condition]) > 1)
        for condition in order
        for value, (numbers, ours) in sorted(found[condition].items())
    )
