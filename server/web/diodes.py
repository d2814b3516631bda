"""The catalogue's pages: the list, to sort and to filter, and one page and one record for each type."""

from fastapi import APIRouter, Request
from pydantic import BaseModel, ConfigDict
from starlette.datastructures import QueryParams
from starlette.responses import Response
from starlette.templating import Jinja2Templates

from server.catalog import parts
from server.catalog.datasheet import Sheet
from server.catalog.part import Part
from server.physics.diode import ActiveLaw, JunctionLaw
from server.selection.heating import rated_current_a
from server.selection.study import ENGINE_VERSION
from server.web import diode_figures, diode_words, one_diode, refusals, shelf
from server.web.api import desk_of
from server.web.diode_figures import Sampled
from server.web.one_diode import LeftOut, Told
from server.web.printed import Point, printed_points
from server.web.refusals import Refusal
from server.web.responses import ProblemResponse, record
from server.web.schemas import CatalogPartOut, SheetOut
from server.web.words import TECHNOLOGIES

router = APIRouter(include_in_schema=False)

# What the templates of one type say figures with.
SAID: dict[str, object] = {
    "amps": diode_words.amps,
    "amps_span": diode_words.amps_span,
    "fact": diode_words.fact,
    "night_h": diode_figures.NIGHT_H,
}


def _render(request: Request, name: str, context: dict[str, object], status: int = 200) -> Response:
    templates: Jinja2Templates = request.app.state.templates
    return templates.TemplateResponse(request, name, context, status_code=status)


# --- the list ---------------------------------------------------------------------------------------------------------


@router.get("/diodes")
async def diodes(request: Request) -> Response:
    """The list as the address asks for it, or what is wrong with the address and everything that was typed."""
    given, told = shelf.read_query(request.query_params)
    rows = await desk_of(request).run(shelf.chosen, given) if given else []
    context: dict[str, object] = {
        "typed": _typed(request.query_params),
        "refusals": told,
        "labels": shelf.LABELS,
        "sorts": shelf.SORTS,
        "technologies": {name: TECHNOLOGIES[name] for name in TECHNOLOGIES if name != "reference"},
        "heads": shelf.heads(given or shelf.ShelfIn()),
        "rows": rows,
        "count": len(parts.load_parts()),
        "unfitted": [(one_diode.slug(item.type), item) for item in parts.unfitted()],
        "filtered": bool(given and given.model_dump(exclude_defaults=True, exclude={"sort"})),
    }
    return _render(request, "diodes.html", context, 200 if given else 422)


def _typed(query: QueryParams) -> dict[str, str]:
    return {name: refusals.readable(query.get(name, ""), 80) for name in shelf.ShelfIn.model_fields}


# --- one type ---------------------------------------------------------------------------------------------------------


class SheetRatingsOut(SheetOut):
    """One sheet and what it prints. None: not printed on the part that could be read."""

    vrrm_v: float | None
    if_av_a: float | None
    if_av_at: str | None
    if_av_at_c: float | None
    if_av_per: str
    if_av_note: str | None
    ifsm_a: float | None
    ifsm_pulse_ms: float | None
    ifsm_note: str | None
    tj_max_c: float | None
    tj_max_forward_only_c: float | None
    rth_ja_c_per_w: float | None
    rth_jl_c_per_w: float | None
    rth_jc_c_per_w: float | None
    rth_note: str | None


class PrintedOut(BaseModel):
    """A printed point beside ours, and the numbers of the sheets that print it, from 1.

    Volts at `at` amperes (forward), amperes at `at` volts (reverse). `sheets_differ`: another sheet prints a different
    value for the same condition.
    """

    model_config = ConfigDict(from_attributes=True)

    quantity: str
    at: float
    junction_c: float | None
    kind: str
    printed: float
    ours: float | None
    sheets: list[int]
    sheets_differ: bool

    @classmethod
    def of(cls, point: Point) -> "PrintedOut":
        """From the page's record."""
        names = [name for name in cls.model_fields if name not in ("sheets", "sheets_differ")]
        values = {name: getattr(point, name) for name in names}
        return cls(**values, sheets=list(point.sheets), sheets_differ=point.others)


class CurvesOut(BaseModel):
    """Curves of one leg, both corners: one list for each entry of the second axis."""

    x: list[float]
    each: list[float]
    typical: list[list[float]]
    maximum: list[list[float]]

    @classmethod
    def of(cls, sampled: Sampled) -> "CurvesOut":
        """From arrays [x, each]."""
        x, each = sampled.x.tolist(), list(sampled.curves)
        return cls(x=x, each=each, typical=sampled.typical.T.tolist(), maximum=sampled.maximum.T.tolist())


class LawOut(BaseModel):
    """A fitted law, one corner, per die."""

    typical: dict[str, float]
    maximum: dict[str, float]


class DiodeOut(CatalogPartOut):
    """A part with its curves. Currents, leakage and drain are those of one leg."""

    engine_version: str
    parallel_legs: int
    rated_current_a: float | None
    sheet_ratings: list[SheetRatingsOut]
    printed: list[PrintedOut]
    law: LawOut
    drop_v_by_current_a_and_junction_c: CurvesOut
    leakage_a_by_reverse_v_and_junction_c: CurvesOut
    leakage_a_by_junction_c_and_reverse_v: CurvesOut
    night_drain_ah_by_junction_c_and_reverse_v: CurvesOut

    @classmethod
    def of_told(cls, told: Told) -> "DiodeOut":
        """From what the page shows."""
        part = told.part
        return cls(
            **dict(CatalogPartOut.of(part)),
            engine_version=ENGINE_VERSION,
            parallel_legs=part.parallel_legs,
            rated_current_a=rated_current_a(part, part.parallel_legs),
            sheet_ratings=_sheets(part.sheets),
            printed=[PrintedOut.of(point) for point in told.points],
            law=LawOut(typical=_law(part.typical), maximum=_law(part.maximum)),
            drop_v_by_current_a_and_junction_c=CurvesOut.of(told.drops),
            leakage_a_by_reverse_v_and_junction_c=CurvesOut.of(told.leaks),
            leakage_a_by_junction_c_and_reverse_v=CurvesOut.of(told.heats),
            night_drain_ah_by_junction_c_and_reverse_v=CurvesOut.of(told.nights),
        )


class LeftOutOut(BaseModel):
    """A type that cannot be computed with: what is printed, and why that is not enough."""

    engine_version: str
    key: str
    type: str
    technology: str
    package: str | None
    dies: int
    reason: str
    partners: list[str]
    sheet_ratings: list[SheetRatingsOut]
    printed: list[PrintedOut]

    @classmethod
    def of(cls, one: LeftOut) -> "LeftOutOut":
        """From the page's record."""
        item = one.item
        return cls(
            engine_version=ENGINE_VERSION,
            key=one.key,
            type=item.type,
            technology=item.technology,
            package=item.package,
            dies=item.dies,
            reason=one.reason,
            partners=[part.type for part in one.partners],
            sheet_ratings=_sheets(item.sheets),
            printed=[PrintedOut.of(point) for point in printed_points(one.item.sheets, None)],
        )


def _sheets(sheets: tuple[Sheet, ...]) -> list[SheetRatingsOut]:
    return [SheetRatingsOut.model_validate(sheet) for sheet in sheets]


def _law(law: JunctionLaw | ActiveLaw) -> dict[str, float]:
    return {name: float(getattr(law, name)) for name in law.__slots__}


def _unknown(name: str) -> Refusal:
    close = one_diode.close_to(name)
    offer = f"; close to it: {', '.join(close)}" if close else ""
    return Refusal("", f"{refusals.shown(name)} is not in the catalogue{offer}")


@router.get("/diodes/{name}.json")
async def diode_json(request: Request, name: str) -> Response:
    """One type as a record; the same names as in the catalogue's, and the curves."""
    one = await desk_of(request).run(one_diode.named, name)
    if one is None:
        return ProblemResponse(refusals.problem(404, [_unknown(name)], request.url.path), 404)
    if isinstance(one, LeftOut):
        return record(LeftOutOut.of(one))
    return record(await desk_of(request).run(_record_of, one))


def _record_of(part: Part) -> DiodeOut:
    return DiodeOut.of_told(one_diode.told(part.key))


@router.get("/diodes/{name}")
async def diode(request: Request, name: str) -> Response:
    """One type: all that is printed, our curves beside it, and what was assumed."""
    one = await desk_of(request).run(one_diode.named, name)
    if one is None:
        context: dict[str, object] = {"name": refusals.readable(name), "close": one_diode.offers(name)}
        return _render(request, "diode_unknown.html", context, 404)
    if isinstance(one, LeftOut):
        return _render(
            request, "diode_left_out.html", {"one": one, "points": printed_points(one.item.sheets, None)} | SAID
        )
    return _render(request, "diode.html", {"told": await desk_of(request).run(one_diode.told, one.key)} | SAID)
