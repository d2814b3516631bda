"""The bare circuit as a service: given string, diodes and bank, the currents. Records of POST /api/v1/loop."""

import math
from typing import Annotated, Literal

import numpy as np
from pydantic import BaseModel, BeforeValidator, Discriminator, Field, Tag

from server.catalog import parts
from server.errors import InputError
from server.physics import circuit
from server.physics.diode import DiodeCells, DiodeLaw, FloatArray, NoDiode, PerfectValve
from server.physics.pv import ModuleLabel, SingleDiode, StringSpec, fit_label
from server.web.schemas import Number, Optional, OptionalWhole, OwnDiodeIn, SingleDiodeIn, Strict, Whole, number_text

MAX_LOOP_CELLS = 20_000


def _many(value: object) -> object:
    """One number is a list of one."""
    if isinstance(value, list):
        return [number_text(item) for item in value]
    return [number_text(value)]


def _name_or_own(value: object) -> str:
    return "named" if isinstance(value, str) else "own"


Many = Annotated[list[float], BeforeValidator(_many), Field(min_length=1, max_length=MAX_LOOP_CELLS)]
LoopDiode = Annotated[
    Annotated[str, Field(min_length=1, max_length=80), Tag("named")] | Annotated[OwnDiodeIn, Tag("own")],
    Discriminator(_name_or_own),
]


class StringIn(Strict):
    """One string: the module by its label or by its single-diode parameters, and how many in series."""

    module_voc_v: Optional = None
    module_isc_a: Optional = None
    module_vmp_v: Optional = None
    module_imp_a: Optional = None
    cells: OptionalWhole = None
    cell_type: Literal["mono", "poly", "heterojunction", "thin_film"] = "mono"
    voc_pct_per_c: Optional = None
    isc_pct_per_c: Optional = None
    single_diode: SingleDiodeIn | None = None
    modules_in_series: Whole = 1
    soiling_frac: Number = 0.0
    mismatch_frac: Number = 0.0
    dark_current: Literal["low", "middle", "high"] = "middle"
    dark_shunt_ohm: Annotated[Optional, Field(description="Dark shunt of one module; null: no shunt in the dark")] = (
        None
    )

    def to_spec(self) -> tuple[StringSpec, float]:
        """The string, and one module's dark shunt. Raises InputError with the names of this record."""
        try:
            module, cells, isc_a = self._module()
            spec = StringSpec(module, cells, isc_a, self.modules_in_series, self.soiling_frac, self.mismatch_frac)
        except InputError as bad:
            inner = "single_diode." if bad.field in SingleDiodeIn.model_fields else ""
            raise InputError(f"string.{inner}{bad.field}", bad.sentence) from bad
        if "dark_shunt_ohm" not in self.model_fields_set:
            return spec, spec.dark_shunt_ohm(self.dark_current)
        if self.dark_shunt_ohm is None:
            return spec, math.inf
        if not 1e-3 <= self.dark_shunt_ohm <= 1e12:
            raise InputError("string.dark_shunt_ohm", f"{self.dark_shunt_ohm:g} ohm is outside 0.001 to 1e+12 ohm")
        return spec, self.dark_shunt_ohm

    def _module(self) -> tuple[SingleDiode, int, float]:
        if self.single_diode is not None:
            module = self.single_diode.to_module()
            if self.cells is None and "dark_shunt_ohm" not in self.model_fields_set:
                raise InputError(
                    "cells", "it is missing; the dark shunt is estimated from it unless dark_shunt_ohm is given"
                )
            return module, 1 if self.cells is None else self.cells, module.photo_a
        for name in ("module_voc_v", "module_isc_a", "module_vmp_v", "module_imp_a"):
            if getattr(self, name) is None:
                raise InputError(name, "it is missing; give the four label values, or single_diode")
        label = ModuleLabel(
            self.module_voc_v or 0.0,
            self.module_isc_a or 0.0,
            self.module_vmp_v or 0.0,
            self.module_imp_a or 0.0,
            self.cells,
            self.cell_type,
            self.voc_pct_per_c,
            self.isc_pct_per_c,
        )
        return fit_label(label).module, label.series_cells, label.isc_a


class LoopIn(Strict):
    """String, diodes, loop and bank, row by row. Lists have one length; a single number holds for all rows."""

    string: StringIn
    diodes: Annotated[list[LoopDiode], Field(min_length=1, max_length=50)]
    corner: Literal["typical", "maximum"] = "typical"
    loop_ohm: Number = 0.0
    battery_v: Many
    poa_w_m2: Many
    cell_c: Annotated[Many, Field(default_factory=lambda: [25.0])]
    box_c: Annotated[Many, Field(default_factory=lambda: [25.0])]
    rth_c_per_w: Annotated[Number, Field(description="Junction to the box's air; 0 holds the junction at box_c")] = 0.0
    tracks: bool = False

    def solve(self) -> "LoopOut":
        """The circuit, solved. Raises InputError."""
        rows = max(len(getattr(self, name)) for name in _LOOP_BOUNDS)
        if rows * len(self.diodes) > MAX_LOOP_CELLS:
            raise InputError(
                "diodes", f"{rows} rows by {len(self.diodes)} diodes are more than the {MAX_LOOP_CELLS} cells taken"
            )
        columns = {name: self._column(name, rows) for name in _LOOP_BOUNDS}
        for name, value, high, unit in (
            ("loop_ohm", self.loop_ohm, 1e4, "ohm"),
            ("rth_c_per_w", self.rth_c_per_w, 1e3, "°C/W"),
        ):
            if not 0.0 <= value <= high:
                raise InputError(name, f"{value:g} {unit} is outside 0 to {high:g} {unit}")
        spec, dark_ohm = self.string.to_spec()
        named = [self._law(index) for index in range(len(self.diodes))]
        state = circuit.solve(
            circuit.LoopInput(
                string=spec.cells(columns["poa_w_m2"], columns["cell_c"], dark_ohm),
                diodes=DiodeCells.of([law for _, law in named]),
                bank_v=columns["battery_v"],
                ohm=self.loop_ohm,
                box_c=columns["box_c"],
                rth_c_per_w=self.rth_c_per_w,
                tracks=self.tracks,
            )
        )
        return LoopOut(
            rows=rows,
            not_converged=int(np.count_nonzero(~state.converged)),
            diodes=[
                LoopDiodeOut(
                    name=name,
                    converged=[bool(done) for done in state.converged[:, column]],
                    **{field: _column_of(getattr(state, field), column) for field in _LOOP_ARRAYS},
                )
                for column, (name, _) in enumerate(named)
            ],
        )

    def _column(self, name: str, rows: int) -> FloatArray:
        values = np.asarray(getattr(self, name), dtype=np.float64)
        if len(values) not in (1, rows):
            raise InputError(name, f"it has {len(values)} values, and the longest list {rows}; give 1 or {rows}")
        low, high, unit = _LOOP_BOUNDS[name]
        for row in np.flatnonzero(~((values >= low) & (values <= high)))[:1]:
            raise InputError(f"{name}[{row}]", f"{values[row]:g} {unit} is outside {low:g} to {high:g} {unit}")
        return np.broadcast_to(values, (rows,))

    def _law(self, index: int) -> tuple[str, DiodeLaw]:
        wanted = self.diodes[index]
        if isinstance(wanted, str):
            if wanted.strip().casefold() == "none":
                return "none", NoDiode()
            if wanted.strip().casefold() == "perfect":
                return "perfect", PerfectValve()
            try:
                chosen = parts.part(wanted)
            except InputError as bad:
                raise InputError(f"diodes[{index}]", bad.sentence) from bad
        else:
            try:
                chosen = wanted.to_part(index)
            except InputError as bad:
                raise InputError(bad.field.replace("own_diodes", "diodes", 1), bad.sentence) from bad
        return chosen.type, chosen.typical if self.corner == "typical" else chosen.maximum


_LOOP_BOUNDS = {
    "battery_v": (0.0, 5000.0, "V"),
    "poa_w_m2": (0.0, 2000.0, "W/m²"),
    "cell_c": (-90.0, 150.0, "°C"),
    "box_c": (-90.0, 150.0, "°C"),
}
_LOOP_ARRAYS = (
    "current_a",
    "bus_v",
    "diode_v",
    "junction_c",
    "string_w",
    "bus_w",
    "diode_w",
    "cable_w",
    "imbalance_w",
)


def _column_of(values: FloatArray, column: int) -> list[float | None]:
    """One diode's rows, null where there is no number."""
    return [float(x) if math.isfinite(x) else None for x in values[:, column]]


class LoopDiodeOut(BaseModel):
    """One diode in the loop, row by row. Positive current flows from string to bank; powers are of one string."""

    name: str
    current_a: list[float | None]
    bus_v: list[float | None]
    diode_v: list[float | None]
    junction_c: list[float | None]
    converged: list[bool]
    string_w: list[float | None]
    bus_w: list[float | None]
    diode_w: list[float | None]
    cable_w: list[float | None]
    imbalance_w: list[float | None]


class LoopOut(BaseModel):
    """The bare circuit, solved."""

    rows: int
    not_converged: int
    diodes: list[LoopDiodeOut]
