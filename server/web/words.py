"""Numbers and codes as a reader sees them: template filters, and the words for our codes."""

import math
from collections.abc import Callable

from server.selection.result import FaultCase

DASH = "–"
NO_NUMBER = "—"
HOTTEST_TOLD_C = 300.0
# The last digit of a 3½-digit meter on its 200 mV range, and of an ordinary DC clamp (common practice).
METER_DIGIT_V, CLAMP_DIGIT_A = 1e-4, 0.01

STANDINGS = {
    "pass": "fits",
    "marginal": "tight",
    "confirm": "ask the maker",
    "fail": "fails",
    "reference": "reference",
}
OUTCOMES = {"pass": "met", "marginal": "tight", "fail": "not met", "info": "note"}
MARKS = {"pass": "●", "marginal": "◐", "confirm": "?", "fail": "✕", "info": "i", "reference": "○"}
TECHNOLOGIES = {
    "schottky": "Schottky",
    "trench_schottky": "trench Schottky",
    "super_barrier": "super-barrier",
    "sic_schottky": "silicon-carbide Schottky",
    "pn_silicon": "silicon pn",
    "active": "active rectifier",
    "reference": "reference",
}
FAULT_OUTCOMES = {"pass": "within it", "marginal": "tight", "fail": "beyond it", "info": "not judged"}
REFERENCES = {"case": "case", "lead": "lead", "ambient": "air"}
SOURCES = {
    "read": "source read",
    "from memory": "from memory",
    "common practice": "common practice",
    "arithmetic": "arithmetic",
}


def fig(value: float | None, digits: int = 3) -> str:
    """A number to so many significant digits, never in powers of ten: 0.00127, 4.08, 1 660."""
    if value is None or not math.isfinite(value):
        return NO_NUMBER
    if value == 0:
        return "0"
    exponent = int(f"{value:.{digits - 1}e}".split("e")[1])  # of the rounded number: 0.9996 is 1.00
    if exponent < -9:
        return "0"
    places = max(0, digits - 1 - exponent)
    rounded = round(value, digits - 1 - exponent)
    return f"{rounded:,.{places}f}".replace(",", "\N{NARROW NO-BREAK SPACE}").replace("-", "−")


def given(value: float | None) -> str:
    """A number as someone wrote it: no zeros added."""
    return NO_NUMBER if value is None or not math.isfinite(value) else f"{value:.6g}".replace("-", "−")


def tiny(value: float) -> str:
    """A rounding error: its power of ten is what matters."""
    return f"{value:.0e}".replace("-", "−") if math.isfinite(value) else NO_NUMBER


def fixed(value: float | None, places: int = 1) -> str:
    """A number to so many decimals."""
    if value is None or not math.isfinite(value):
        return NO_NUMBER
    text = f"{value:,.{places}f}".replace(",", "\N{NARROW NO-BREAK SPACE}")
    return text.replace("-", "−") if float(f"{value:.{places}f}") else text.lstrip("-")


def milli(value: float | None, digits: int = 2) -> str:
    """A thousandfold: amperes as milliamperes."""
    return NO_NUMBER if value is None else fig(1e3 * value, digits)


def milli_span(low: float | None, high: float | None, digits: int = 2) -> str:
    """Two values in thousandths, once where they print alike."""
    return _span(milli(low, digits), milli(high, digits))


def small(value: float | None, unit: str, digits: int = 2) -> str:
    """A value in the unit a meter would show it in: 221 A, 8.5 mA, 67 µV."""
    if value is None or not math.isfinite(value) or value == 0:
        return f"{fig(value, digits)} {unit}"
    size = abs(value)
    if size >= 0.9995:
        return f"{fig(value, max(digits, 3))} {unit}"
    return f"{fig(1e3 * value, digits)} m{unit}" if size >= 0.9995e-3 else f"{fig(1e6 * value, digits)} µ{unit}"


def small_span(low: float, high: float, unit: str, digits: int = 2) -> str:
    """Two values in the units a meter would show them in; the unit once where they share it."""
    first, last = small(low, unit, digits), small(high, unit, digits)
    if first == last:
        return first
    number, of_first = first.rsplit(" ", 1)
    return f"{number}{DASH}{last}" if of_first == last.rsplit(" ", 1)[1] else f"{first} to {last}"


def span(low: float | None, high: float | None, digits: int = 2) -> str:
    """Two values, once where they print alike."""
    return _span(fig(low, digits), fig(high, digits))


def _span(first: str, last: str) -> str:
    return first if first == last else f"{first}{DASH}{'?' if last == NO_NUMBER else last}"


def junction(value: float | None) -> str:
    """A junction temperature; beyond what any part survives the number means nothing."""
    return f"over {HOTTEST_TOLD_C:g}" if value is not None and value > HOTTEST_TOLD_C else fixed(value, 0)


def fault(case: FaultCase) -> str:
    """How a fault's current stands to what is allowed."""
    if case.code == "diode_shorted":
        return "silent"
    if case.outcome == "info":
        # Nothing to hold it against; where not even a bare string takes anything, nothing need be.
        return "nothing flows" if case.without_a == 0 and not case.maximum_a else FAULT_OUTCOMES["info"]
    if case.outcome == "fail" and (case.allowed_a is None or case.without_a is None):
        return "not limited"
    return FAULT_OUTCOMES[case.outcome]


def percent(value: float | None, places: int = 0) -> str:
    """A fraction as per cent."""
    return NO_NUMBER if value is None or not math.isfinite(value) else fixed(100.0 * value, places) + " %"


def plain(value: object) -> str:
    """A code as words: underscores are spaces."""
    return str(value).replace("_", " ")


FILTERS: dict[str, Callable[..., str]] = {
    "fig": fig,
    "fixed": fixed,
    "given": given,
    "tiny": tiny,
    "milli": milli,
    "small": small,
    "percent": percent,
    "plain": plain,
}
