"""HTML routes. A job's address is the job; a page that refuses it keeps everything typed."""

from dataclasses import dataclass
from datetime import UTC, datetime
from typing import Any

from fastapi import APIRouter, Request
from starlette.responses import FileResponse, Response

from server.errors import InputError, Overloaded
from server.paths import asset_dir
from server.physics import thermal
from server.selection import faults, field_test, heating, ratings
from server.selection.ranking import plain_equal
from server.selection.result import Candidate
from server.web import charts, form, refusals
from server.web.api import desk_of
from server.web.examples import EXAMPLES
from server.web.fields import FOLDED_GROUPS, LABELS, OPEN_GROUPS
from server.web.form import DEMO, DEMO_STORY, FormState
from server.web.refusals import Refusal
from server.web.schemas import JobIn, links_of
from server.web.work import Answer

router = APIRouter(include_in_schema=False)

SHOWN_FIRST = 8
ON_SHEET = 7
BOXES_ON_SHEET = 4  # strings whose readings find room
LONGEST_PRINTED = 600  # characters of an address that anyone would type again
# Rooms whose named constants the pages tell, so that no figure is written twice.
CONSTANTS: dict[str, Any] = {
    "faults": faults,
    "field_test": field_test,
    "heating": heating,
    "ratings": ratings,
    "thermal": thermal,
}
TOLD_APART_FRAC = 0.1  # two heatsink figures nearer than this are one


@dataclass(frozen=True, slots=True)
class ResultView:
    """A study, cut the way the pages show it."""

    answer: Answer
    choice: Candidate | None
    first: tuple[Candidate, ...]
    """The best, and the two references."""
    others: tuple[Candidate, ...]
    failed: tuple[Candidate, ...]
    losses: charts.Losses
    day: charts.Day
    sink_to_buy_c_per_w: float | None
    """The choice's catalogue figure for a heatsink, where it is told apart from the one that is needed."""
    plain_equal: Candidate | None
    """A plain diode as good as the active rectifier that is chosen."""
    bare_tab: bool
    """Even the largest resistance that counts as a heatsink is cool enough."""
    needed_v: float | None
    needed_a: float | None
    """What any part in the place of the choice must be rated for."""
    page: str
    sheet: str
    json: str

    @classmethod
    def of(cls, answer: Answer) -> "ResultView":
        """From an answer."""
        study = answer.study
        choice = study.candidate(study.verdict.choice) if study.verdict.choice else None
        standing = [item for item in study.candidates if item.part is not None and item.standing != "fail"]
        references = [item for item in study.candidates if item.part is None]
        failed = [item for item in study.candidates if item.part is not None and item.standing == "fail"]
        first = standing[:SHOWN_FIRST]
        runner_up = next((item for item in standing if item.key == study.verdict.runner_up), None)
        if runner_up is not None and runner_up not in first:
            first.append(runner_up)
        if not first:
            first = failed[:SHOWN_FIRST]
        shown = sorted(
            (*first, *references), key=lambda item: item is not choice
        )  # the choice leads, even if it is none
        period = study.facts.deciding_period
        links = links_of(answer.given)
        return cls(
            answer=answer,
            choice=choice,
            first=tuple(shown),
            others=tuple(item for item in standing if item not in first),
            failed=tuple(failed),
            losses=charts.losses(
                [item for item in shown if item.key != "perfect-valve"], period, study.facts.periods[period]
            ),
            day=charts.day(study.day, with_diode=choice is not None and choice.part is not None),
            sink_to_buy_c_per_w=_sink_to_buy(choice),
            plain_equal=plain_equal(study.candidates, choice),
            bare_tab=_bare_tab(choice),
            needed_v=_most(choice, "reverse_stress", "rule_voltage"),
            needed_a=_most(choice, "current"),
            page=links.page or "",
            sheet=links.sheet or "",
            json=links.json_ or "",
        )


def _most(choice: Candidate | None, *codes: str) -> float | None:
    met = [check.met for check in choice.checks if check.code in codes and check.met is not None] if choice else []
    return max(met, default=None)


def _bare_tab(choice: Candidate | None) -> bool:
    needed = choice.sink_needed_c_per_w if choice else None
    return needed is not None and needed >= (1.0 - TOLD_APART_FRAC) * heating.LARGEST_SINK_C_PER_W


def _sink_to_buy(choice: Candidate | None) -> float | None:
    needed, quoted = (choice.sink_needed_c_per_w, choice.sink_to_buy_c_per_w) if choice else (None, None)
    if needed is None or quoted is None or abs(quoted - needed) <= TOLD_APART_FRAC * needed:
        return None
    return quoted


def _render(request: Request, name: str, context: dict[str, Any], status: int = 200, wait_s: int = 0) -> Response:
    headers = {"Retry-After": str(wait_s)} if wait_s else None
    response: Response = request.app.state.templates.TemplateResponse(
        request, name, context, status_code=status, headers=headers
    )
    return response


def _form_context(state: FormState) -> dict[str, Any]:
    return {"state": state, "open_groups": OPEN_GROUPS, "folded_groups": FOLDED_GROUPS, "labels": LABELS}


async def _answered(
    request: Request, given: JobIn | None, told: list[Refusal]
) -> tuple[ResultView | None, list[Refusal], int, int]:
    """The view, what was refused, the status, and how long to wait."""
    if given is None:
        return None, told, 422, 0
    try:
        return ResultView.of(await desk_of(request).answer(given)), told, 200, 0
    except InputError as bad:
        return None, [refusals.of_input_error(bad)], 422, 0
    except Overloaded as busy:
        return None, [Refusal("", str(busy))], 503, busy.retry_after_s


@router.get("/")
async def home(request: Request) -> Response:
    """The form, filled in with the worked example, and the example's verdict."""
    view, told, _, _ = await _answered(request, DEMO, [])
    state = FormState(form.shown_values(DEMO))
    context = {"view": view, "refusals": told, "story": DEMO_STORY, "demo": links_of(DEMO)}
    return _render(request, "home.html", context | _form_context(state))


@router.get("/job")
async def job(request: Request) -> Response:
    """The verdict on the job in the address, or the form with what is wrong beside each field."""
    return await _view_of_address(request, "study.html")


@router.get("/sheet")
async def sheet(request: Request) -> Response:
    """One page to print and take along."""
    return await _view_of_address(request, "sheet.html")


async def _view_of_address(request: Request, template: str) -> Response:
    given, told = form.read_query(request.query_params)
    view, told, status, wait_s = await _answered(request, given, told)
    state = FormState(form.typed(request.query_params), tuple(told))
    room = {"on_sheet": ON_SHEET, "boxes": BOXES_ON_SHEET, "longest_address": LONGEST_PRINTED}
    today = datetime.now(UTC).date().isoformat()
    context = _form_context(state) | CONSTANTS | room | {"view": view, "today": today}
    return _render(request, template if view else "job.html", context, status, wait_s)


@router.get("/method")
async def method(request: Request) -> Response:
    """Laws, sources, accuracy, limits."""
    return _render(request, "method.html", CONSTANTS)


@router.get("/api")
async def api_page(request: Request) -> Response:
    """What programs may ask, with an example of each."""
    return _render(request, "api.html", {"examples": EXAMPLES})


@router.get("/favicon.ico")
async def favicon() -> Response:
    """The mark."""
    return FileResponse(asset_dir("static") / "favicon.svg", media_type="image/svg+xml")
