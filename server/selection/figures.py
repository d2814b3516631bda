"""Numbers as a reader wants them: two or three figures, never an exponent, the unit a meter would show."""


def figure(value: float, digits: int = 2) -> str:
    """`value` to so many figures, without an exponent."""
    rounded = float(f"{value:.{digits}g}")
    if rounded == 0:
        return "0"
    text = f"{rounded:.10f}" if abs(rounded) < 1 else f"{rounded:.{digits}f}"
    return text.rstrip("0").rstrip(".")


def milli(value_a: float) -> str:
    """A current in A, mA or µA."""
    size = abs(value_a)
    if size >= 0.9995:
        return f"{figure(value_a, 3)} A"
    if size >= 0.9995e-3:
        return f"{figure(1e3 * value_a)} mA"
    return f"{figure(1e6 * value_a)} µA"


def ampere_hours(value_ah: float) -> str:
    """An amount of charge in Ah, or mAh where that reads better."""
    return f"{value_ah:.2f} Ah" if abs(value_ah) >= 0.9995 else f"{figure(1e3 * value_ah)} mAh"
