"""create_app(): rooms of the site, one table of errors, static files."""

import contextlib
import hashlib
import logging
import threading
from collections.abc import AsyncIterator, Sequence
from pathlib import Path

import jinja2
from fastapi import FastAPI, Request
from fastapi.exceptions import RequestValidationError
from pydantic import BaseModel
from starlette.exceptions import HTTPException
from starlette.middleware.gzip import GZipMiddleware
from starlette.responses import Response
from starlette.staticfiles import StaticFiles
from starlette.templating import Jinja2Templates
from starlette.types import ASGIApp, Scope

from server.catalog import parts
from server.errors import InputError, Overloaded
from server.paths import asset_dir
from server.physics.lazy import pvlib_module
from server.selection.study import ENGINE_VERSION
from server.web import api, diodes, pages, refusals, words
from server.web.form import DEMO
from server.web.guard import MAX_BODY_BYTES, SORRY, TOO_LARGE, Guard
from server.web.loop import LoopIn
from server.web.refusals import Refusal
from server.web.responses import ProblemResponse
from server.web.schemas import JobIn
from server.web.work import Desk

log = logging.getLogger("duskvalve")

BODIES: dict[str, type[BaseModel]] = {"/api/v1/job": JobIn, "/api/v1/loop": LoopIn}
A_DAY_S = 86_400
A_YEAR_S = 365 * A_DAY_S


def create_app(desk: Desk | None = None) -> ASGIApp:
    """The whole site, ready for a server. A `desk` of one's own serves the tests."""
    app = FastAPI(
        title="Duskvalve",
        summary="Decides whether a solar string needs a series (blocking) diode, which one, and what it costs.",
        version=ENGINE_VERSION,
        openapi_url="/api/openapi.json",
        docs_url=None,
        redoc_url=None,
        swagger_ui_oauth2_redirect_url=None,
        redirect_slashes=False,
        telemetry={"auto_configure": False, "tracing": False, "metrics": False},
        max_body_size=MAX_BODY_BYTES,
        lifespan=_lifespan,
    )
    app.state.desk = desk or Desk()
    app.state.templates = _templates()
    app.include_router(diodes.router)
    app.include_router(pages.router)
    app.include_router(api.router)
    app.mount("/static", _Static(directory=asset_dir("static")))
    app.add_middleware(GZipMiddleware, minimum_size=800, compresslevel=5)
    app.add_exception_handler(InputError, _input_error)
    app.add_exception_handler(RequestValidationError, _invalid_body)
    app.add_exception_handler(Overloaded, _overloaded)
    app.add_exception_handler(HTTPException, _http_error)
    app.add_exception_handler(Exception, _bug)
    return Guard(app, lambda scope, status, sentence: _refuse(app, Request(scope), status, [Refusal("", sentence)]))


@contextlib.asynccontextmanager
async def _lifespan(app: FastAPI) -> AsyncIterator[None]:
    """Warm up beside the first requests, never before them."""
    threading.Thread(target=_warm, args=(app.state.desk,), name="warm-up", daemon=True).start()
    yield


def _warm(desk: Desk) -> None:
    """Import what is slow to import, read the catalogue, compute the worked example."""
    try:
        pvlib_module("ivtools.sdm")
        parts.load_parts()
        desk.answer_here(DEMO)
    except Exception:  # the first request will meet the same trouble and tell it
        log.exception("warm-up failed")


def _templates() -> Jinja2Templates:
    env = jinja2.Environment(
        loader=jinja2.FileSystemLoader(asset_dir("templates")),
        autoescape=True,  # for .svg too
        trim_blocks=True,
        lstrip_blocks=True,
        undefined=jinja2.StrictUndefined,
    )
    env.filters.update(words.FILTERS)
    env.globals.update(
        version=ENGINE_VERSION,
        assets=_fingerprint(asset_dir("static")),
        words=words,
    )
    return Jinja2Templates(env=env)


def _fingerprint(folder: Path) -> str:
    """Changes when a static file does, so that browsers may keep them for long."""
    digest = hashlib.sha256()
    for file in sorted(folder.rglob("*")):
        if file.is_file():
            digest.update(file.read_bytes())
    return digest.hexdigest()[:10]


class _Static(StaticFiles):
    """Static files that say how long they keep: a year under an address with a fingerprint, else a day."""

    async def get_response(self, path: str, scope: Scope) -> Response:
        response = await super().get_response(path, scope)
        keep_s = A_YEAR_S if scope.get("query_string") else A_DAY_S
        if response.status_code == 200:
            response.headers["Cache-Control"] = f"public, max-age={keep_s}"
        return response


# --- the table of errors: coroutines all, for a plain function would wait for a thread --------------------------------


def _wants_json(path: str) -> bool:
    return path.startswith(("/api/", "/healthz")) or path.endswith(".json")


def _refuse(
    app: FastAPI, request: Request, status: int, told: Sequence[Refusal], headers: dict[str, str] | None = None
) -> Response:
    """One shape for programs, one page for people; the same sentences."""
    if _wants_json(request.url.path):
        return ProblemResponse(refusals.problem(status, told, request.url.path), status, headers=headers)
    context = {"status": status, "title": refusals.TITLES.get(status, "The request was refused"), "refusals": told}
    templates: Jinja2Templates = app.state.templates
    return templates.TemplateResponse(request, "error.html", context, status_code=status, headers=headers)


async def _input_error(request: Request, bad: Exception) -> Response:
    assert isinstance(bad, InputError)  # noqa: S101  FastAPI's handler type is wider than what it calls with
    return _refuse(request.app, request, 422, [refusals.of_input_error(bad)])


async def _invalid_body(request: Request, bad: Exception) -> Response:
    """What pydantic refused in a JSON body."""
    assert isinstance(bad, RequestValidationError)  # noqa: S101
    kind = request.headers.get("content-type", "").split(";")[0].strip().lower()
    if not (kind == "application/json" or (kind.startswith("application/") and kind.endswith("+json"))):
        sentence = f"the body is {refusals.readable(kind) or 'of no stated type'}; application/json is needed"
        return _refuse(request.app, request, 415, [Refusal("", sentence)])
    found = [{**error, "loc": error["loc"][1:]} for error in bad.errors()]
    return _refuse(request.app, request, 422, refusals.of_validation(found, BODIES[request.url.path]))


async def _overloaded(request: Request, bad: Exception) -> Response:
    assert isinstance(bad, Overloaded)  # noqa: S101
    headers = {"Retry-After": str(bad.retry_after_s)}
    return _refuse(request.app, request, 503, [Refusal("", str(bad))], headers)


async def _http_error(request: Request, bad: Exception) -> Response:
    assert isinstance(bad, HTTPException)  # noqa: S101
    path = refusals.readable(request.url.path, 80)
    sentence = {
        404: f"{path} is no page and no file here",
        405: f"{path} does not take {request.method}",
        413: TOO_LARGE,
    }.get(bad.status_code, refusals.readable(bad.detail, 200))
    headers = dict(bad.headers) if bad.headers else None
    return _refuse(request.app, request, bad.status_code, [Refusal("", sentence)], headers)


async def _bug(request: Request, _: Exception) -> Response:
    """The trace goes to the log, by the guard; the reader gets an apology."""
    return _refuse(request.app, request, 500, [Refusal("", SORRY)])
