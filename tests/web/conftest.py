import httpx
import pytest

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
