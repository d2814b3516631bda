import contextlib
import os
import shutil
import threading
import time

import httpx
import pytest
import uvicorn

from server.web.app import create_app
from server.web.work import Desk

# Three parts of the catalogue are enough to ask a question, and quick to answer.
JOB = {
    "module_voc_v": 22.0,
    "module_isc_a": 5.9,
    "module_vmp_v": 18.2,
    "module_imp_a": 5.5,
    "chemistry": "flooded",
    "battery_nominal_v": 12,
    "battery_ah": 110,
    "controller": "shunt",
    "peak_sun_h": 4.2,
    "daylight_h": 11,
    "day_air_c": 27,
    "night_air_c": 22,
    "cable_one_way_m": 6,
    "cable_mm2": 4,
    "candidates": ["10SQ050", "SB560", "10A10"],
}
QUERY = {name: ",".join(value) if isinstance(value, list) else str(value) for name, value in JOB.items()}


@pytest.fixture
def anyio_backend():
    return "asyncio"


@pytest.fixture(scope="session")
def kept_desk():
    """One desk for all tests that only read answers, so that each job is computed once."""
    return Desk()


def client_of(app):
    return httpx.AsyncClient(transport=httpx.ASGITransport(app), base_url="http://site.test")


@pytest.fixture
async def client(kept_desk):
    async with client_of(create_app(kept_desk)) as asking:
        yield asking


@pytest.fixture
def job():
    return dict(JOB)


@pytest.fixture
def query():
    return dict(QUERY)


@pytest.fixture
def asking():
    """A client for an app of the test's own."""
    return client_of


@pytest.fixture
def assert_error_shape():
    return _assert_error_shape


def _assert_error_shape(answer, status=422, field=None, says=()):
    """Every refusal of the API, whoever noticed it: RFC 9457, with fields and sentences."""
    assert answer.status_code == status, answer.text[:500]
    assert answer.headers["content-type"] == "application/problem+json"
    body = answer.json()
    assert set(body) == {"type", "title", "status", "detail", "errors", "instance"}
    assert body["status"] == status
    assert body["title"]
    assert body["errors"], body
    for one in body["errors"]:
        assert set(one) == {"field", "sentence"}
        assert one["sentence"]
        assert "Traceback" not in one["sentence"]
    if field is not None:
        sentences = [one["sentence"] for one in body["errors"] if one["field"] == field]
        assert sentences, body["errors"]
        for word in says:
            assert word in sentences[0], sentences[0]
    return body


# --- a real browser ---------------------------------------------------------------------------------------------------

BROWSERS = ("chromium", "chromium-browser", "google-chrome", "google-chrome-stable")
FLAGS = (
    "--no-sandbox",
    "--disable-gpu",
    "--disable-quic",
    "--no-first-run",
    "--disable-background-networking",
    "--disable-component-update",
    "--disable-sync",
)


def _missing(what):
    """Where a browser is asked for, one that is missing is a failure; elsewhere the test says why it did not run."""
    reason = f"{what} is not installed; set REQUIRE_BROWSER to make this a failure"
    if os.environ.get("REQUIRE_BROWSER"):
        pytest.fail(f"REQUIRE_BROWSER is set, but {what} is not installed", pytrace=False)
    pytest.skip(reason)


@pytest.fixture(scope="module")
def browser():
    """Chromium, driven from outside. It ends with its module, for it keeps an event loop of its own."""
    try:
        from playwright.sync_api import sync_playwright
    except ImportError:
        _missing("playwright")
    found = next((path for path in map(shutil.which, BROWSERS) if path), None)
    if found is None:
        _missing("chromium")
    with (
        sync_playwright() as driver,
        contextlib.closing(driver.chromium.launch(executable_path=found, args=list(FLAGS))) as opened,
    ):
        yield opened


@pytest.fixture(scope="module")
def site(kept_desk):
    """The site at a port of this computer."""
    server = uvicorn.Server(uvicorn.Config(create_app(kept_desk), port=0, lifespan="off", log_level="error"))
    thread = threading.Thread(target=server.run, daemon=True)
    thread.start()
    until = time.monotonic() + 20
    while not server.started and time.monotonic() < until:
        time.sleep(0.02)
    assert server.started
    yield f"http://127.0.0.1:{server.servers[0].sockets[0].getsockname()[1]}"
    server.should_exit = True
    thread.join(20)
