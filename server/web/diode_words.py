"""Figures of one type in words: currents as a meter shows them, printed facts, the parameters of its law."""

import math
from dataclasses import dataclass

from server.catalog.part import Part
from server.physics.diode import ActiveLaw
from server.web.words import DASH, NO_NUMBER, fig, given, small

LEAST_TOLD_A = 1e-12  # a law goes on below; what it says there means nothing


def amps(value: float) -> str:
    """A current in the unit a meter would show it in, down to picoamperes."""
    if not math.isfinite(value):
        return NO_NUMBER
    for size, prefix in ((1.0, ""), (1e-3, "m"), (1e-6, "µ"), (1e-9, "n")):
        if abs(value) >= 0.9995 * size:
            return f"{fig(value / size, 2)} {prefix}A"
    if 0 < value < LEAST_TOLD_A:
        return "< 1 pA"
    return f"{fig(value * 1e12, 2)} pA" if value else "0 A"


def amps_span(low: float, high: float) -> str:
    """Two currents; the unit once where they share it."""
    first, last = amps(low), amps(high)
    if first == last:
        return first
    if first[0] == "<":
        return f"{first} to {last}"
    number, unit = first.rsplit(" ", 1)
    return f"{number}{DASH}{last}" if last.endswith(f" {unit}") else f"{first}{DASH}{last}"


# --- printed facts ----------------------------------------------------------------------------------------------------

# How facts of controllers and switches begin, in the trade's symbols; "typ", "max" and "min" stay as they are.
SYMBOLS = {
    "i_d_test": "ID of the test",
    "i_dss_25c_v_ds": "VDS of that",
    "i_dss_150c_v_ds": "VDS of that",
    "i_dss_25c": "IDSS at 25 °C,",
    "i_dss_150c": "IDSS at 150 °C,",
    "i_forward": "IF",
    "i_q_operating": "IQ, operating,",
    "i_reverse_hot": "IR, hot,",
    "i_reverse": "IR",
    "i_shutdown_ideal_diode": "shutdown current, ideal diode,",
    "i_shutdown_load_switch": "shutdown current, load switch,",
    "i_shutdown": "shutdown current,",
    "p": "power",
    "r_ds_on_v_gs": "VGS of that",
    "r_ds_on": "RDS(on)",
    "t_ambient": "air",
    "t_junction": "junction",
    "t_reverse_block": "time to block in reverse,",
    "v_battery": "battery voltage",
    "v_ds": "VDS",
    "v_forward_average_at": "current of that",
    "v_forward_average": "mean forward drop",
    "v_forward_regulated": "regulated forward drop",
    "v_in_start": "VIN to start",
    "v_in": "VIN",
    "v_reverse_threshold": "reverse threshold",
    "v_reverse": "VR",
    "v_sd": "body diode drop",
}
UNITS = {"v": "V", "ohm": "Ω", "c": "°C", "s": "s", "w": "W"}


def fact(name: str, value: float) -> tuple[str, str]:
    """A printed fact of a controller or a switch as words and a value with its unit."""
    begun = max((start for start in SYMBOLS if name.startswith(start + "_")), key=len, default="")
    rest = name.removeprefix(begun + "_" if begun else "").split("_")
    unit = UNITS.get(rest[-1], "A" if name.startswith("i_") or rest[-1] == "a" else "")
    if rest[-1] in UNITS or rest[-1] == "a":
        rest = rest[:-1]
    words = " ".join([SYMBOLS[begun], *rest] if begun else rest).strip(", ")
    if isinstance(value, bool):
        words, said = words.replace("25c", "holds at 25 °C"), "yes" if value else "no"
    elif unit == "A":
        said = amps(value)
    elif unit in ("V", "Ω", "s") and 0 < abs(value) < 1:
        said = small(value, unit)
    else:
        said = f"{given(value)} {unit}".strip()
    return words[0].upper() + words[1:], said


# --- the law's parameters ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Parameter:
    """One parameter of the law in both corners, with one sentence."""

    name: str
    typical: str
    maximum: str
    sentence: str


JUNCTION_WORDS: dict[str, tuple[str, str, str]] = {
    "saturation_a": ("Saturation current", "A", "Forward current that the exponential law starts from, at 25 °C."),
    "ideality": ("Ideality", "", "How many thermal voltages the drop rises by for each 2.7-fold current."),
    "barrier_ev": ("Barrier", "eV", "Energy that sets how fast the drop falls as the junction warms."),
    "series_ohm": ("Series resistance", "ohm", "What bends the drop upwards at high current, at 25 °C."),
    "series_ohm_per_k": ("Its change", "ohm/K", "How much that resistance grows, or falls, with each degree."),
    "leakage_a": ("Leakage at the reference", "A", "Reverse current at 25 °C and the reference voltage."),
    "leakage_ref_v": ("Reference voltage", "V", "Reverse voltage that the leakage is anchored at."),
    "leakage_exponent": ("Voltage exponent", "", "Power of the reverse voltage that the leakage follows."),
    "leakage_ev": ("Activation energy", "eV", "Energy that sets how fast the leakage grows with heat."),
}
ACTIVE_WORDS: dict[str, tuple[str, str, str]] = {
    "regulated_v": ("Regulated drop", "V", "What the controller holds across the switch at low current."),
    "rds_on_ohm": ("RDS(on)", "ohm", "Resistance of the switch fully on, at 25 °C: it sets the drop at high current."),
    "rds_on_per_k": ("Its growth", "%/K", "How much that resistance grows with each degree."),
    "supply_a": ("Supply current", "A", "What the controller takes from the bank, day and night."),
    "turnoff_v": ("Reverse turn-off", "V", "Reverse voltage across the switch at which the controller lets go."),
    "leakage_a": ("Leakage at the reference", "A", "Drain current of the switch, off, at 25 °C."),
    "leakage_ref_v": ("Reference voltage", "V", "Voltage that the leakage is anchored at."),
    "leakage_exponent": ("Voltage exponent", "", "Power of the voltage that the leakage follows."),
    "leakage_ev": ("Activation energy", "eV", "Energy that sets how fast the leakage grows with heat."),
}


def _told(value: float, unit: str) -> str:
    if unit == "A":
        if 0 < value < 1e-12:
            power = math.floor(math.log10(value))
            return f"{value / 10.0**power:.2g}·10^{power} A".replace("-", "−")
        return amps(value)
    if unit in ("ohm", "ohm/K"):
        per_k = "/K" if unit.endswith("K") else ""
        size, prefix = (1e-3, "m") if abs(value) < 1 else (1.0, "")
        if abs(value) < 1e-3:
            size, prefix = 1e-6, "µ"
        return f"{fig(value / size, 3)} {prefix}Ω{per_k}"
    if unit == "%/K":
        return f"{fig(100 * value, 2)} %/K"
    return f"{fig(value, 4)} {unit}".strip()


def parameters(part: Part) -> tuple[Parameter, ...]:
    """The law's parameters, per die."""
    table = ACTIVE_WORDS if isinstance(part.typical, ActiveLaw) else JUNCTION_WORDS
    return tuple(
        Parameter(name, _told(getattr(part.typical, field), unit), _told(getattr(part.maximum, field), unit), sentence)
        for field, (name, unit, sentence) in table.items()
    )
