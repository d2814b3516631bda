"""Class values: what a technology usually does, for what a sheet leaves out. Each with its source.

The medians are recomputed from diodes.toml by the tests, so that a new sheet cannot leave them behind.
A technology has its own median where three or more sheets print the pair, otherwise that of all technologies.
"""

from dataclasses import dataclass

HOT_C = 85.0  # a leakage point from here up is "hot": physics; below it a maximum is a test limit

# Typical over maximum leakage at 25 °C, the same voltage: median of 7 sheets in this catalogue; SiC of 3.
COLD_RATIO = {"all": 0.200, "sic_schottky": 0.197}
# Typical over maximum leakage at 85 °C and above: median of 17 sheets in this catalogue; Schottky of 11; SiC of 3.
HOT_RATIO = {"all": 0.275, "schottky": 0.333, "sic_schottky": 0.100}
# Maximum less typical forward drop at one current and temperature, V: median of 25 sheets in this catalogue;
# Schottky of 16, super-barrier of 4, SiC of 3.
DROP_OFFSET_V = {"all": 0.070, "schottky": 0.070, "super_barrier": 0.045, "sic_schottky": 0.350}


@dataclass(frozen=True, slots=True)
class ClassValues:
    """Centres and spreads of what points may leave open, for one technology."""

    words: str
    ideality: float
    ideality_sd: float
    ideality_low: float
    ideality_high: float
    temperature_power: float
    slope_v_per_k: float
    slope_source: str
    series_drop_v: float
    series_drop_sd_v: float
    barrier_ev: float | None
    ohm_rise_per_k: float
    leakage_ev: float
    leakage_ev_source: str
    leakage_exponent_sd: float
    cold_ratio: float
    hot_ratio: float
    drop_offset_v: float


def _ratios(technology: str) -> tuple[float, float, float]:
    tables = (COLD_RATIO, HOT_RATIO, DROP_OFFSET_V)
    cold, hot, drop_v = (table.get(technology, table["all"]) for table in tables)
    return cold, hot, drop_v


# Leakage is taken to grow as VR^0.7 where a sheet prints one voltage: an engineering estimate ("about proportional to
# VR between 10 and 40 V"; sheets of this catalogue that print two voltages lie between 0.4 and 1.6).
LEAKAGE_EXPONENT = 0.7
LEAKAGE_EXPONENT_SOURCE = "engineering estimate, about proportional to VR between 10 and 40 V"

# Series drop at the first printed current (the rated one as a rule), V: what is left of the step to the highest
# current at 25 °C after n·Vt·ln(I2/I1) with the class ideality. Medians of the maximum columns of this catalogue:
# Schottky 46 sheets, pn 3; the others from all 50.
SERIES_DROP_V = {"all": 0.135, "schottky": 0.138, "pn_silicon": 0.126}

# Drift resistance grows with T^2.3 or so by falling mobility, 0.8 %/K (from memory: Sze, Physics of Semiconductor
# Devices, lightly doped material); contacts, leads and substrate hardly grow. Engineering estimates: 0.3 %/K for
# silicon, 0.6 %/K for SiC. A sheet with two currents at two temperatures overrules them.
SILICON_OHM_RISE_PER_K = 0.003
SIC_OHM_RISE_PER_K = 0.006

# The one SiC sheet of this catalogue with two currents (C5D50065D, typical column) leaves 0.46 V for the series part.
SIC_SERIES_DROP_V = 0.46
# Titanium on 4H-SiC, about 1.25 eV, from memory; a spread of 0.1 eV is allowed.
SIC_BARRIER_EV = 1.25
BARRIER_SD_EV = 0.1

_SCHOTTKY_SLOPE = "-1.0 mV/K, the middle of the -0.7 to -1.6 mV/K that Schottky sheets print"

CLASSES = {
    "schottky": ClassValues(
        "silicon Schottky", 1.08, 0.03, 1.0, 1.4, 2.0, -1.0e-3, _SCHOTTKY_SLOPE, SERIES_DROP_V["schottky"], 0.03, None,
        SILICON_OHM_RISE_PER_K, 0.60, "0.6 eV: the three typical pairs of this catalogue lie at 0.54 to 0.63 eV",
        0.3, *_ratios("schottky"),
    ),
    "trench_schottky": ClassValues(
        "trench Schottky", 1.08, 0.03, 1.0, 1.4, 2.0, -0.7e-3,
        "-0.7 mV/K: the two sheets of this catalogue print -0.4 to -0.9 mV/K", SERIES_DROP_V["all"], 0.03, None,
        SILICON_OHM_RISE_PER_K, 0.60, "0.60 eV, the middle of 0.58 to 0.62 eV (one typical pair prints 0.62 eV)",
        0.3, *_ratios("trench_schottky"),
    ),
    "super_barrier": ClassValues(
        "super-barrier", 1.08, 0.03, 1.0, 1.4, 2.0, -0.4e-3,
        "-0.4 mV/K: four sheets of this catalogue print -0.1 to -0.5 mV/K", SERIES_DROP_V["all"], 0.03, None,
        SILICON_OHM_RISE_PER_K, 0.60, "0.60 eV, the middle of 0.58 to 0.62 eV (typical pairs print 0.57 and 0.60 eV)",
        0.3, *_ratios("super_barrier"),
    ),
    "sic_schottky": ClassValues(
        "SiC Schottky", 1.05, 0.03, 1.0, 1.4, 2.0, 2.0e-3,
        "+2 mV/K at rated current: three sheets of this catalogue print +0.3 to +4.7 mV/K",
        SIC_SERIES_DROP_V, 0.2, SIC_BARRIER_EV,
        SIC_OHM_RISE_PER_K, 0.05,
        "0.05 eV: leakage tunnels through the barrier and hardly heats up; three typical pairs lie at 0.03 to 0.11 eV",
        3.0, *_ratios("sic_schottky"),
    ),
    "pn_silicon": ClassValues(
        "silicon pn", 1.7, 0.15, 1.2, 2.2, 3.0, -1.8e-3,
        "-1.8 mV/K, the cautious end of -1.8 to -2.2 mV/K (trade pages)", SERIES_DROP_V["pn_silicon"], 0.03, None,
        SILICON_OHM_RISE_PER_K, 0.55, "0.55 eV, the middle of 0.4 to 0.7 eV between surface leakage and generation",
        0.3, *_ratios("pn_silicon"),
    ),
}  # fmt: skip
