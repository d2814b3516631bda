"""JSON routes."""

import functools
from typing import Any

from fastapi import APIRouter, Request
from starlette.responses import JSONResponse, Response

from server.catalog import parts
from server.selection.study import ENGINE_VERSION
from server.web import form, refusals
from server.web.loop import LoopIn, LoopOut
from server.web.refusals import PROBLEM_TYPE
from server.web.responses import ProblemResponse, record
from server.web.schemas import CatalogOut, CatalogPartOut, JobIn, StudyOut, UnfittedOut
from server.web.work import Desk

router = APIRouter()

PROBLEM_SCHEMA: dict[str, Any] = {
    "type": "object",
    "required": ["type", "title", "status", "detail", "errors", "instance"],
    "properties": {
        "type": {"type": "string"},
        "title": {"type": "string"},
        "status": {"type": "integer"},
        "detail": {"type": "string"},
        "instance": {"type": "string"},
        "errors": {
            "type": "array",
            "items": {
                "type": "object",
                "required": ["field", "sentence"],
                "properties": {"field": {"type": "string"}, "sentence": {"type": "string"}},
            },
        },
    },
}


def _problems(*statuses: int) -> dict[int | str, dict[str, Any]]:
    content = {PROBLEM_TYPE: {"schema": PROBLEM_SCHEMA}}
    return {status: {"description": refusals.TITLES[status], "content": content} for status in statuses}


def desk_of(request: Request) -> Desk:
    """The desk that this app computes at."""
    desk: Desk = request.app.state.desk
    return desk


@router.post("/api/v1/job", response_model=StudyOut, responses=_problems(400, 413, 415, 422, 503))
async def post_job(given: JobIn, request: Request) -> Response:
    """Judge one job. The names are those of the form; what is left out takes the form's defaults."""
    answer = await desk_of(request).answer(given)
    return record(StudyOut.of(given, answer.study))


@router.get("/job.json", response_model=StudyOut, responses=_problems(414, 422, 503))
async def get_job(request: Request) -> Response:
    """Judge the job in the address: the same names, and the same answer as by POST."""
    given, told = form.read_query(request.query_params)
    if given is None:
        return ProblemResponse(refusals.problem(422, told, request.url.path), 422)
    answer = await desk_of(request).answer(given)
    return record(StudyOut.of(given, answer.study))


@router.post("/api/v1/loop", response_model=LoopOut, responses=_problems(400, 413, 415, 422, 503))
async def post_loop(given: LoopIn, request: Request) -> Response:
    """Solve the bare circuit: one string, a diode in series, a resistance, a bank."""
    return record(await desk_of(request).run(given.solve))


@functools.cache
def catalog() -> CatalogOut:
    """The catalogue as it leaves."""
    return CatalogOut(
        engine_version=ENGINE_VERSION,
        parts=[CatalogPartOut.of(part) for part in parts.load_parts()],
        unfitted=[UnfittedOut.model_validate(item) for item in parts.unfitted()],
    )


@router.get("/diodes.json", response_model=CatalogOut, include_in_schema=False)
@router.get("/api/v1/diodes", response_model=CatalogOut, responses=_problems(503))
async def get_diodes(request: Request) -> Response:
    """Every type: ratings, printed points beside ours, sources, assumptions; and the types left out, and why."""
    return record(await desk_of(request).run(catalog))


@router.get("/healthz", response_class=JSONResponse)
async def healthz() -> dict[str, str]:
    """Whether the service answers."""
    return {"status": "ok", "version": ENGINE_VERSION}
