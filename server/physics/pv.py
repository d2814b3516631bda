"""String specification -> current at a junction voltage."""

import math
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from server.errors import InputError
from server.physics.lazy import pvlib_module

FloatArray = NDArray[np.float64]

BOLTZMANN_EV_PER_K = 8.617333262e-5  # CODATA 2018, k/q
ZERO_C_K = 273.15
T_STC_K = 298.15

# Band gap of silicon and its slope as De Soto, Klein and Beckman give them, Solar Energy 80 (2006) 78-88 (from memory).
EG_EV = 1.121
EG_PER_K = -0.0002677

# Exponential law between the dark and the lit shunt: exponent per 1000 W/m2, Mermoud and Lejeune, 25th EU PVSEC (2010),
# from memory.
SHUNT_EXPONENT = 5.5
# An estimate, not a measurement: dark shunt of crystalline cells, ohm·cm2 of cell, by how much dark current they take.
DARK_SHUNT_OHM_CM2 = {"low": 20_000.0, "middle": 5_000.0, "high": 1_000.0}
CELL_ISC_A_PER_CM2 = 0.038  # area from Isc, common practice for crystalline silicon

MAX_LABEL_MISFIT_FRAC = 0.02
MAX_CONDUCTING_V_PER_CELL = 1.0

DarkCurrent = Literal["low", "middle", "high"]
CellType = Literal["mono", "poly", "heterojunction", "thin_film"]

# Class values where a label prints no coefficients, %/°C (from memory, typical of datasheets): Voc, Isc, Pmp.
CLASS_COEFFICIENTS: dict[CellType, tuple[float, float, float]] = {
    "mono": (-0.30, 0.05, -0.38),
    "poly": (-0.32, 0.055, -0.41),
    "heterojunction": (-0.25, 0.035, -0.29),
    "thin_film": (-0.30, 0.03, -0.30),
}
# Cells in series that modules are made with (from memory); the nearest by Voc serves where the label prints none.
COMMON_CELL_COUNTS = (9, 10, 12, 18, 20, 24, 30, 32, 33, 36, 40, 44, 48, 54, 60, 66, 72, 78, 80, 96)
OPEN_V_PER_CELL: dict[CellType, float] = {"mono": 0.63, "poly": 0.615, "heterojunction": 0.73, "thin_film": 0.85}
# Bounds against a wrong count: half-cut cells counted twice below, the best wafer cells and stacked thin films above.
LEAST_OPEN_V_PER_CELL = 0.25
MOST_OPEN_V_PER_CELL: dict[CellType, float] = {"mono": 0.8, "poly": 0.8, "heterojunction": 0.85, "thin_film": 3.0}


def _check(field: str, value: float, low: float, high: float, unit: str) -> None:
    if not low <= value <= high:
        raise InputError(field, f"{value:g} {unit} is outside {low:g} to {high:g} {unit}")


@dataclass(frozen=True, slots=True)
class SingleDiode:
    """De Soto parameters of one module at 1000 W/m2 and 25 °C.

    `slope_v` is the modified ideality n·Ns·kT/q; `isc_a_per_k` the photocurrent's temperature slope.
    """

    photo_a: float
    saturation_a: float
    slope_v: float
    series_ohm: float
    shunt_ohm: float
    isc_a_per_k: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what is not a module."""
        _check("photo_a", self.photo_a, 1e-6, 1e5, "A")
        _check("saturation_a", self.saturation_a, 1e-40, 1.0, "A")
        _check("slope_v", self.slope_v, 1e-3, 1e4, "V")
        _check("series_ohm", self.series_ohm, 0.0, 1e4, "ohm")
        _check("shunt_ohm", self.shunt_ohm, 1e-3, 1e12, "ohm")
        _check("isc_a_per_k", self.isc_a_per_k, -1e2, 1e2, "A/K")


@dataclass(frozen=True, slots=True)
class ModuleLabel:
    """What is printed on the back of a module, at STC. Coefficients and cells left out are class values."""

    voc_v: float
    isc_a: float
    vmp_v: float
    imp_a: float
    cells: int | None = None
    cell_type: CellType = "mono"
    voc_pct_per_c: float | None = None
    isc_pct_per_c: float | None = None

    def __post_init__(self) -> None:
        """Refuse a label that no module can have."""
        _check("module_voc_v", self.voc_v, 0.4, 500.0, "V")
        _check("module_isc_a", self.isc_a, 0.001, 100.0, "A")
        _check("module_vmp_v", self.vmp_v, 0.2, 500.0, "V")
        _check("module_imp_a", self.imp_a, 0.001, 100.0, "A")
        if self.vmp_v >= self.voc_v:
            raise InputError("module_vmp_v", f"{self.vmp_v:g} V must lie below Voc, {self.voc_v:g} V")
        if self.imp_a >= self.isc_a:
            raise InputError("module_imp_a", f"{self.imp_a:g} A must lie below Isc, {self.isc_a:g} A")
        fill = self.vmp_v * self.imp_a / (self.voc_v * self.isc_a)
        if not 0.4 <= fill <= 0.9:
            raise InputError(
                "module_vmp_v",
                f"Vmp·Imp is {fill:.2f} of Voc·Isc; modules have 0.40 to 0.90, so one of the four values is off",
            )
        if self.voc_pct_per_c is not None:
            _check("voc_pct_per_c", self.voc_pct_per_c, -0.8, -0.05, "%/°C")
        if self.isc_pct_per_c is not None:
            _check("isc_pct_per_c", self.isc_pct_per_c, -0.2, 0.3, "%/°C")
        if self.cells is not None:
            _check("cells", self.cells, 1, 1000, "cells")
            per_cell = self.voc_v / self.cells
            least, most = LEAST_OPEN_V_PER_CELL, MOST_OPEN_V_PER_CELL[self.cell_type]
            if not least <= per_cell <= most:
                low, high = math.ceil(self.voc_v / most), math.floor(self.voc_v / least)
                raise InputError("cells", f"{self.cells} cells do not fit {self.voc_v:g} V; expected {low} to {high}")

    @property
    def series_cells(self) -> int:
        """Cells in series. A half-cut module's label counts both halves, which lie in parallel."""
        typical = OPEN_V_PER_CELL[self.cell_type]
        if self.cells is None:
            return min(COMMON_CELL_COUNTS, key=lambda n: abs(math.log(self.voc_v / n / typical)))
        return self.cells // 2 if self.cells % 2 == 0 and self.voc_v / self.cells < 0.62 * typical else self.cells

    @property
    def voc_coefficient_pct_per_c(self) -> float:
        """Voc's temperature coefficient, from the label or the class."""
        given = self.voc_pct_per_c
        return CLASS_COEFFICIENTS[self.cell_type][0] if given is None else given

    @property
    def isc_coefficient_pct_per_c(self) -> float:
        """Isc's temperature coefficient, from the label or the class."""
        given = self.isc_pct_per_c
        return CLASS_COEFFICIENTS[self.cell_type][1] if given is None else given

    def voc_at_v(self, cell_c: float) -> float:
        """Open-circuit voltage at 1000 W/m2 and `cell_c`, by the coefficient."""
        return self.voc_v * (1.0 + self.voc_coefficient_pct_per_c / 100.0 * (cell_c - 25.0))


@dataclass(frozen=True, slots=True)
class LabelFit:
    """De Soto parameters for a label, and how far they miss it, each misfit a signed fraction of the label's value."""

    module: SingleDiode
    method: str
    voc_misfit_frac: float
    isc_misfit_frac: float
    vmp_misfit_frac: float
    imp_misfit_frac: float

    @property
    def worst(self) -> tuple[str, float]:
        """Field of the label that is missed most, and the misfit's size."""
        sizes = {
            "module_voc_v": self.voc_misfit_frac,
            "module_isc_a": self.isc_misfit_frac,
            "module_vmp_v": self.vmp_misfit_frac,
            "module_imp_a": self.imp_misfit_frac,
        }
        field = max(sizes, key=lambda name: abs(sizes[name]))
        return field, abs(sizes[field])


def fit_label(label: ModuleLabel) -> LabelFit:
    """De Soto parameters that reproduce the label best.

    pvlib's iterative fit converges from its own start for few labels only, so the explicit estimate of Batzelis seeds
    it; solvers are tried in turn and the physical answer with the least misfit is kept.

    Raises:  InputError naming the field missed most, where the best misfit exceeds 2 %.
    Source:  De Soto et al., Solar Energy 80 (2006); Batzelis, IEEE Trans. Sustain. Energy 8 (2017); both from memory.
    """
    sdm = pvlib_module("ivtools.sdm")
    isc_per_k = label.isc_coefficient_pct_per_c / 100.0 * label.isc_a
    voc_per_k = label.voc_coefficient_pct_per_c / 100.0 * label.voc_v
    seed: dict[str, float] | None = None
    fits: list[LabelFit] = []

    def keep(method: str, photo_a: float, saturation_a: float, slope_v: float, series: float, shunt: float) -> None:
        values = (photo_a, saturation_a, slope_v, series, shunt)
        if not all(math.isfinite(x) for x in values) or series < 0 or shunt <= 0 or slope_v <= 0:
            return
        try:
            module = SingleDiode(photo_a, saturation_a, slope_v, series, min(shunt, 1e12), isc_per_k)
        except InputError:
            return
        fits.append(_label_fit(label, module, method))

    with np.errstate(all="ignore"):
        first = sdm.fit_desoto_batzelis(
            v_mp=label.vmp_v,
            i_mp=label.imp_a,
            v_oc=label.voc_v,
            i_sc=label.isc_a,
            alpha_sc=isc_per_k,
            beta_voc=voc_per_k,
        )
        explicit = [float(first[name]) for name in ("I_L_ref", "I_o_ref", "a_ref", "R_s", "R_sh_ref")]
        keep("explicit", *explicit)
        if all(math.isfinite(x) for x in explicit):
            seed = {
                "IL_0": explicit[0],
                "Io_0": max(explicit[1], 1e-30),
                "a_0": explicit[2],
                "Rs_0": max(explicit[3], 1e-4),
                "Rsh_0": explicit[4] if explicit[4] > 0 else 100.0 * label.voc_v / label.isc_a,
            }
        for method, guess in (("hybr", seed), ("lm", seed), ("lm", None)):
            if fits and min(abs(f.worst[1]) for f in fits) < 1e-6:
                break
            try:
                found, _ = sdm.fit_desoto(
                    v_mp=label.vmp_v,
                    i_mp=label.imp_a,
                    v_oc=label.voc_v,
                    i_sc=label.isc_a,
                    alpha_sc=isc_per_k,
                    beta_voc=voc_per_k,
                    cells_in_series=label.series_cells,
                    init_guess=guess or {},
                    root_kwargs={"method": method},
                )
            except (RuntimeError, ValueError, FloatingPointError):
                continue
            names = ("I_L_ref", "I_o_ref", "a_ref", "R_s", "R_sh_ref")
            keep(f"iterative, {method}", *(float(found[name]) for name in names))
    if not fits:
        raise InputError("module_vmp_v", "no single-diode model reaches these four label values; check each of them")
    best = min(fits, key=lambda fit: fit.worst[1])
    field, misfit = best.worst
    if misfit > MAX_LABEL_MISFIT_FRAC:
        raise InputError(
            field,
            f"the nearest single-diode model misses the label's value by {100 * misfit:.1f} %, more than "
            f"{100 * MAX_LABEL_MISFIT_FRAC:.0f} %; the four values do not belong to one module",
        )
    return best


def _label_fit(label: ModuleLabel, module: SingleDiode, method: str) -> LabelFit:
    lit = StringSpec(module, label.series_cells, label.isc_a).cells(
        np.array([1000.0]), np.array([25.0]), dark_shunt_ohm=math.inf
    )
    open_v = lit.open_circuit_v()
    junction_v, imp = lit.max_power(open_v)
    vmp = junction_v - imp * float(lit.series_ohm[0])
    short_a = _short_circuit_a(lit)
    return LabelFit(
        module,
        method,
        float(open_v[0]) / label.voc_v - 1.0,
        short_a / label.isc_a - 1.0,
        float(vmp[0]) / label.vmp_v - 1.0,
        float(imp[0]) / label.imp_a - 1.0,
    )


def _short_circuit_a(lit: "StringCells") -> float:
    """Terminal short-circuit current: the junction then sits at I·Rs."""
    i = float(lit.photo_a[0])
    for _ in range(50):
        i = float(lit.current_a(np.array([i * lit.series_ohm[0]]))[0])
    return i


def dark_shunt_ohm(cells: int, isc_a: float, band: DarkCurrent) -> float:
    """Dark shunt of one module from the band's ohm·cm2; an estimate until a night reading replaces it."""
    return cells * DARK_SHUNT_OHM_CM2[band] / (isc_a / CELL_ISC_A_PER_CM2)


@dataclass(frozen=True, slots=True)
class StringSpec:
    """Modules in series that make one string, and what stands between label and sun."""

    module: SingleDiode
    cells_per_module: int
    isc_a: float
    modules_in_series: int = 1
    soiling_frac: float = 0.0
    mismatch_frac: float = 0.0

    def __post_init__(self) -> None:
        """Refuse what is not a string."""
        _check("modules_in_series", self.modules_in_series, 1, 100, "modules")
        _check("cells", self.cells_per_module, 1, 1000, "cells")
        _check("soiling_frac", self.soiling_frac, 0.0, 0.9, "of the light")
        _check("mismatch_frac", self.mismatch_frac, 0.0, 0.5, "of the current")

    def dark_shunt_ohm(self, band: DarkCurrent) -> float:
        """Dark shunt of one module in the named band."""
        return dark_shunt_ohm(self.cells_per_module, self.isc_a, band)

    def dark_shunt_from_reading_ohm(self, reading_a: float, terminal_v: float, cell_c: float) -> tuple[float, bool]:
        """Dark shunt of one module that makes the unlit string take `reading_a` at `terminal_v`; whether one exists.

        Where the cells' own junctions already take more than the reading, the shunt is set out of the way (1e12 ohm)
        and the second value is False.
        """
        dark = self.cells(np.array([0.0]), np.array([cell_c]), dark_shunt_ohm=math.inf)
        junction_v = terminal_v - reading_a * float(dark.series_ohm[0])
        if junction_v <= 0:
            raise InputError(
                "night_reading_a", f"{reading_a:g} A at {terminal_v:g} V is more than the string's resistance lets by"
            )
        junctions_a = -float(dark.current_a(np.array([junction_v]))[0])
        shunt_a = reading_a - junctions_a
        if shunt_a <= 1e-12 * junction_v:
            return 1e12, False
        return junction_v / shunt_a / self.modules_in_series, True

    def cells(self, poa_w_m2: FloatArray, cell_c: FloatArray, dark_shunt_ohm: float) -> "StringCells":
        """The string's law for every row of light and temperature.

        Shapes:  poa_w_m2, cell_c [T] -> record of [T].
        Source:  De Soto et al. 2006, but for the shunt: exponential between its dark and its lit value.
        """
        t_k = np.asarray(cell_c, dtype=np.float64) + ZERO_C_K
        light = np.asarray(poa_w_m2, dtype=np.float64) * (1.0 - self.soiling_frac)
        sun = light / 1000.0
        m, n = self.module, self.modules_in_series
        photo_a = sun * (1.0 - self.mismatch_frac) * np.maximum(m.photo_a + m.isc_a_per_k * (t_k - T_STC_K), 0.0)
        gap = EG_EV * (1.0 + EG_PER_K * (t_k - T_STC_K))
        growth = np.exp((EG_EV / T_STC_K - gap / t_k) / BOLTZMANN_EV_PER_K)
        saturation = m.saturation_a * (t_k / T_STC_K) ** 3 * growth
        if math.isinf(dark_shunt_ohm):
            shunt_s = sun / m.shunt_ohm  # De Soto's own law, no shunt in the dark
        else:
            # A very good dark shunt must fade faster, or some of it would be left in full sun.
            exponent = max(SHUNT_EXPONENT, math.log(2.0 * dark_shunt_ohm / m.shunt_ohm))
            fade = math.exp(-exponent)
            base = (m.shunt_ohm - dark_shunt_ohm * fade) / (1.0 - fade)
            shunt_s = 1.0 / (base + (dark_shunt_ohm - base) * np.exp(-exponent * sun))
        return StringCells(
            photo_a,
            np.broadcast_to(saturation, photo_a.shape),
            np.broadcast_to(n * m.slope_v * t_k / T_STC_K, photo_a.shape),
            np.broadcast_to(shunt_s / n, photo_a.shape),
            np.full(photo_a.shape, n * m.series_ohm),
        )


@dataclass(frozen=True, slots=True, eq=False)
class StringCells:
    """The single-diode law of a whole string, one row per time step: I = IL − I0·(exp(y/a) − 1) − y·G.

    y is the string's JUNCTION voltage; its terminals sit I·`series_ohm` lower. All arrays have one shape: [T], or
    [T, 1] after `column()`.
    """

    photo_a: FloatArray
    saturation_a: FloatArray
    slope_v: FloatArray
    shunt_s: FloatArray
    series_ohm: FloatArray

    def __len__(self) -> int:
        """Rows."""
        return len(self.photo_a)

    def take(self, rows: NDArray[np.intp]) -> "StringCells":
        """The same record for some rows only."""
        return StringCells(*(getattr(self, name)[rows] for name in self.__slots__))

    def column(self) -> "StringCells":
        """The same record as [T, 1], to broadcast against diodes."""
        return StringCells(*(getattr(self, name)[:, None] for name in self.__slots__))

    def current_a(self, junction_v: FloatArray) -> FloatArray:
        """Current out of the string; negative when the bank feeds it. Broadcasts."""
        grown = np.exp(np.minimum(junction_v / self.slope_v, 600.0)) - 1.0
        return np.asarray(self.photo_a - self.saturation_a * grown - junction_v * self.shunt_s)

    def current_and_conductance(self, junction_v: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Current, and how fast it falls with junction voltage, in A and A/V."""
        grown = np.exp(np.minimum(junction_v / self.slope_v, 600.0)) - 1.0
        current = self.photo_a - self.saturation_a * grown - junction_v * self.shunt_s
        return current, self.saturation_a / self.slope_v * (grown + 1.0) + self.shunt_s

    def open_circuit_v(self) -> FloatArray:
        """Open-circuit voltage of every row. The current is concave, so Newton comes down on it from above."""
        y = self.slope_v * np.log1p(self.photo_a / self.saturation_a)
        for _ in range(60):
            current, conductance = self.current_and_conductance(y)
            step = current / conductance
            y = np.maximum(y + step, 0.0)
            if np.all(np.abs(step) <= 1e-13 * (1.0 + y)):
                break
        return y

    def max_power(self, open_circuit_v: FloatArray) -> tuple[FloatArray, FloatArray]:
        """Junction voltage and current of the maximum-power point at the string's terminals, every row; 0, 0 unlit."""
        low, high = np.zeros_like(open_circuit_v), open_circuit_v.copy()
        y = 0.8 * open_circuit_v
        for _ in range(80):
            current, conductance = self.current_and_conductance(y)
            terminal_v = y - current * self.series_ohm
            value = conductance * (terminal_v - current * self.series_ohm) - current
            curvature = (conductance - self.shunt_s) / self.slope_v
            slope = curvature * (terminal_v - current * self.series_ohm) + 2.0 * conductance
            slope = slope + 2.0 * conductance**2 * self.series_ohm
            low, high = np.where(value <= 0, y, low), np.where(value >= 0, y, high)
            with np.errstate(divide="ignore", invalid="ignore"):
                trial = y - value / slope
            trial = np.where((trial >= low) & (trial <= high), trial, 0.5 * (low + high))
            moved = np.abs(trial - y)
            y = trial
            if np.all(moved <= 1e-12 * (1.0 + y)):
                break
        current = np.maximum(self.current_a(y), 0.0)
        lit = open_circuit_v > 0
        return np.where(lit, y, 0.0), np.where(lit, current, 0.0)
