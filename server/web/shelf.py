"""The catalogue as a list: what may be asked of it in an address, and the rows that answer."""

import functools
import operator
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Annotated, Any, Literal
from urllib.parse import urlencode

import numpy as np
from pydantic import AfterValidator, BaseModel, BeforeValidator, ConfigDict, Field, ValidationError
from starlette.datastructures import QueryParams

from server.catalog import parts
from server.catalog.part import Part
from server.physics.diode import DiodeCells, forward_drop_v, reverse_a
from server.selection.heating import rated_current_a
from server.web import refusals
from server.web.refusals import Refusal
from server.web.schemas import number_text
from server.web.words import TECHNOLOGIES

SEEN_AT_V, SEEN_AT_C = 13.0, 25.0  # a 12 V bank at rest; what most sheets are printed for
NBSP = "\N{NO-BREAK SPACE}"
ACTIVE_SEEN_A = 10.0  # active rectifiers print no current to quote the drop at

Technology = Literal["schottky", "trench_schottky", "super_barrier", "sic_schottky", "pn_silicon", "active"]

SORTS: dict[str, str] = {
    "technology": "technology, then type",
    "type": "type, A to Z",
    "-type": "type, Z to A",
    "package": "package, A to Z",
    "-package": "package, Z to A",
    "vrrm_v": "VRRM, lowest first",
    "-vrrm_v": "VRRM, highest first",
    "if_a": "IF(AV), lowest first",
    "-if_a": "IF(AV), highest first",
    "drop_v": "drop, lowest first",
    "-drop_v": "drop, highest first",
    "leakage_typical_a": "typical leakage, lowest first",
    "-leakage_typical_a": "typical leakage, highest first",
    "leakage_maximum_a": "maximum leakage, lowest first",
    "-leakage_maximum_a": "maximum leakage, highest first",
    "sheets": "fewest sheets first",
    "-sheets": "most sheets first",
    "remarks": "fewest remarks first",
    "-remarks": "most remarks first",
}
LABELS = {
    "technology": "Technology",
    "vrrm_min_v": "VRRM at least",
    "if_min_a": "IF(AV) at least",
    "package": "Package or type",
    "sort": "Order",
}
# Columns that can be sorted by, as the table shows them: the name in the address, the head, its unit.
COLUMNS = (
    ("type", "Type", ""),
    ("technology", "Technology", ""),
    ("package", "Package", ""),
    ("vrrm_v", "VRRM", "V"),
    ("if_a", "IF(AV)", "A"),
    ("drop_v", "Drop, typical", f"V at that current, 25{NBSP}°C"),
    ("leakage_typical_a", "Leakage, typical", f"mA at 13{NBSP}V, 25{NBSP}°C"),
    ("leakage_maximum_a", "Leakage, maximum", f"mA at 13{NBSP}V, 25{NBSP}°C"),
    ("sheets", "Sheets", ""),
    ("remarks", "Remarks", ""),
)


def _nothing(value: object) -> object:
    """An empty field is a field left out."""
    return None if isinstance(value, str) and not value.strip() else value


def _text(value: object) -> object:
    return value.strip() if isinstance(value, str) else value


def _order(value: str) -> str:
    if value and value not in SORTS:
        names = ", ".join(name for name, _, _ in COLUMNS)
        raise ValueError(
            f"{refusals.shown(value)} is no order known here; take one of {names}; a minus before it: falling"
        )
    return value or "technology"


class ShelfIn(BaseModel):
    """What is asked of the list. Text takes a decimal comma."""

    model_config = ConfigDict(extra="forbid", frozen=True)

    technology: Annotated[Technology | None, BeforeValidator(_nothing)] = None
    vrrm_min_v: Annotated[
        Annotated[float, Field(ge=0, le=20_000, allow_inf_nan=False)] | None, BeforeValidator(number_text)
    ] = None
    if_min_a: Annotated[
        Annotated[float, Field(ge=0, le=5_000, allow_inf_nan=False)] | None, BeforeValidator(number_text)
    ] = None
    package: Annotated[str, BeforeValidator(_text), Field(max_length=60)] = ""
    sort: Annotated[str, BeforeValidator(_text), AfterValidator(_order)] = "technology"


def read_query(query: QueryParams) -> tuple[ShelfIn | None, list[Refusal]]:
    """What is asked, or what is wrong with it."""
    raw: dict[str, str] = {}
    told = []
    for name, value in query.multi_items():
        if name in raw and name in ShelfIn.model_fields:
            told.append(Refusal(name, "it is given more than once; give it once"))
        raw[name] = value
    try:
        given = ShelfIn.model_validate(raw)
    except ValidationError as bad:
        return None, told + refusals.of_validation(bad.errors(include_url=False), ShelfIn)
    return (None, told) if told else (given, told)


# --- rows -------------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Row:
    """One part in the list. None: not printed."""

    part: Part
    type: str
    technology: str
    package: str | None
    vrrm_v: float
    if_a: float | None
    """What it carries with the legs side by side that can be."""
    drop_at_a: float
    drop_v: float
    """Typical, at `drop_at_a` through one leg, 25 °C."""
    leakage_typical_a: float
    leakage_maximum_a: float
    """Of one leg, at 13 V, 25 °C."""
    sheets: int
    remarks: int


def quoted_current_a(part: Part) -> float:
    """Current of one leg that the drop is quoted at: the rating, else the lowest current of a printed point."""
    rated = rated_current_a(part, 1)
    printed = [point.current_a for sheet in part.sheets for point in sheet.forward]
    return rated if rated is not None else min(printed, default=ACTIVE_SEEN_A)


def _row(part: Part) -> Row:
    cells = DiodeCells.of([part.typical, part.maximum])
    at_a = quoted_current_a(part)
    drop = forward_drop_v(cells, np.array(at_a), np.array(SEEN_AT_C))
    leak = reverse_a(cells, np.array(SEEN_AT_V), np.array(SEEN_AT_C))
    return Row(
        part=part,
        type=part.type,
        technology=part.technology,
        package=part.package,
        vrrm_v=part.vrrm_v,
        if_a=rated_current_a(part, part.parallel_legs),
        drop_at_a=at_a,
        drop_v=float(drop[0]),
        leakage_typical_a=float(leak[0]),
        leakage_maximum_a=float(leak[1]),
        sheets=len(part.sheets),
        remarks=len(part.warnings),
    )


@functools.cache
def rows() -> tuple[Row, ...]:
    """Every part, in the catalogue's order."""
    return tuple(_row(part) for part in parts.load_parts())


def _natural(text: str) -> tuple[tuple[int, int, str], ...]:
    """Digits sort as numbers: SB360 stands before SB1240."""
    pieces = re.findall(r"\d+|\D+", text.casefold())
    return tuple((0, int(piece), "") if piece.isdigit() else (1, 0, piece) for piece in pieces)


SHELVES = list(TECHNOLOGIES)
KEYS: Mapping[str, Callable[[Row], Any]] = {
    "technology": lambda row: SHELVES.index(row.technology),
    "type": lambda row: _natural(row.type),
    "package": lambda row: None if row.package is None else _natural(row.package),
}


def _fits(row: Row, given: ShelfIn) -> bool:
    letters = given.package.casefold()
    return (
        given.technology in (None, row.technology)
        and (given.vrrm_min_v is None or row.vrrm_v >= given.vrrm_min_v)
        and (given.if_min_a is None or (row.if_a is not None and row.if_a >= given.if_min_a))
        and (letters in (row.package or "").casefold() or letters in row.type.casefold())
    )


def chosen(given: ShelfIn) -> list[Row]:
    """The rows asked for, in the order asked for; what is not printed stands last either way."""
    found = sorted((row for row in rows() if _fits(row, given)), key=KEYS["type"])
    name = given.sort.lstrip("-")
    if name == "type":
        return found[::-1] if given.sort == "-type" else found
    key = KEYS.get(name) or operator.attrgetter(name)
    told = [row for row in found if key(row) is not None]
    told.sort(key=key, reverse=given.sort.startswith("-"))  # stable: equals stay by type
    return told + [row for row in found if key(row) is None]


# --- addresses --------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Head:
    """A column's head: the address that sorts by it, and how it is sorted now ("ascending", "descending" or "")."""

    name: str
    label: str
    unit: str
    address: str
    sorted: str


def heads(given: ShelfIn) -> list[Head]:
    """The table's heads, each a link that keeps the filters."""
    kept = {name: value for name, value in given.model_dump(exclude={"sort"}).items() if value not in (None, "")}
    kept = {name: f"{value:g}" if isinstance(value, float) else value for name, value in kept.items()}
    found = []
    for name, label, unit in COLUMNS:
        now = {name: "ascending", f"-{name}": "descending"}.get(given.sort, "")
        other = f"-{name}" if now == "ascending" and f"-{name}" in SORTS else name
        found.append(Head(name, label, unit, "/diodes?" + urlencode(kept | {"sort": other}), now))
    return found
