"""Cable resistance."""

import math
from typing import Literal

from server.errors import InputError

Conductor = Literal["copper", "aluminium"]

# Resistivity at 20 °C, ohm·mm2/m, and its coefficient per °C at 20 °C. Copper: IEC 60228 / 60287 figures; aluminium:
# IEC 60889 hard-drawn wire, from memory.
RESISTIVITY: dict[Conductor, tuple[float, float]] = {"copper": (0.017241, 0.00393), "aluminium": (0.028264, 0.00403)}

# Stranded uncoated copper at 75 °C, ohm per km: NEC 2017, Chapter 9, Table 8.
NEC_TABLE_8_OHM_PER_KM: dict[str, float] = {
    "14": 10.3,
    "12": 6.50,
    "10": 4.070,
    "8": 2.551,
    "4": 1.010,
    "3": 0.802,
    "2": 0.634,
    "1": 0.505,
    "1/0": 0.399,
    "2/0": 0.317,
    "3/0": 0.2512,
    "4/0": 0.1996,
}
# Lay of the strands lengthens them: the table's stranded values lie about 2 % above its solid ones.
STRANDED_FACTOR = 1.02
TABLE_C = 75.0


def awg_area_mm2(awg: str) -> float:
    """Cross-section of an American wire gauge, "30" to "4/0". Source: diameters as in ASTM B258 (from memory).

    Raises:  InputError for anything else.
    """
    text = awg.strip()
    try:
        number = 1 - int(text[:-2]) if text.endswith("/0") else int(text)
    except ValueError:
        raise InputError("cable_awg", f"{awg!r} is not a wire gauge; write 24 to 1, or 1/0 to 4/0") from None
    if not -3 <= number <= 30:
        raise InputError("cable_awg", f"{awg!r} is outside 30 to 4/0")
    diameter_mm = 0.127 * float(92 ** ((36 - number) / 39))
    return math.pi / 4 * diameter_mm**2


def wire_ohm(length_m: float, area_mm2: float, temp_c: float = 20.0, conductor: Conductor = "copper") -> float:
    """Resistance of ideal metal of this length, both ways not counted. Linear in temperature about 20 °C."""
    rho, alpha = RESISTIVITY[conductor]
    return rho * length_m / area_mm2 * (1.0 + alpha * (temp_c - 20.0))


def awg_ohm_per_km(awg: str, temp_c: float = 75.0, conductor: Conductor = "copper") -> float:
    """Stranded wire by gauge: for copper from the table where it lists the gauge, else metal with the strands' lay."""
    _, alpha = RESISTIVITY[conductor]
    key = awg.strip()
    if conductor == "copper" and key in NEC_TABLE_8_OHM_PER_KM:
        at_75 = NEC_TABLE_8_OHM_PER_KM[key]
        return at_75 * (1.0 + alpha * (temp_c - 20.0)) / (1.0 + alpha * (TABLE_C - 20.0))
    return STRANDED_FACTOR * wire_ohm(1000.0, awg_area_mm2(awg), temp_c, conductor)


def loop_ohm(
    one_way_m: float,
    temp_c: float,
    *,
    area_mm2: float | None = None,
    awg: str | None = None,
    conductor: Conductor = "copper",
    terminals_ohm: float = 0.0,
) -> float:
    """Out and back, with the terminals.

    Raises:  InputError naming the field and bound.
    """
    if not 0.0 <= one_way_m <= 5000.0:
        raise InputError("cable_one_way_m", f"{one_way_m:g} m is outside 0 to 5000 m")
    if not 0.0 <= terminals_ohm <= 10.0:
        raise InputError("terminals_ohm", f"{terminals_ohm:g} ohm is outside 0 to 10 ohm")
    if conductor not in RESISTIVITY:
        raise InputError("conductor", f"{conductor!r} is neither copper nor aluminium")
    if area_mm2 is not None and awg is not None:
        raise InputError("cable_awg", f"gauge {awg} and {area_mm2:g} mm² are both given; give one of them")
    if awg is not None:
        return 2.0 * one_way_m / 1000.0 * awg_ohm_per_km(awg, temp_c, conductor) + terminals_ohm
    if area_mm2 is None:
        raise InputError("cable_mm2", "no cross-section is given; give cable_mm2 or cable_awg")
    if not 0.05 <= area_mm2 <= 1000.0:
        raise InputError("cable_mm2", f"{area_mm2:g} mm² is outside 0.05 to 1000 mm²")
    return 2.0 * wire_ohm(one_way_m, area_mm2, temp_c, conductor) + terminals_ohm
