import re

import pytest

from server.web.app import create_app
from server.web.fields import FOLDED_GROUPS, OPEN_GROUPS
from server.web.guard import SECURITY_HEADERS
from server.web.schemas import JobIn

pytestmark = pytest.mark.anyio

PAGES = ["/", "/diodes", "/method", "/api"]


def assert_whole_page(text):
    """One heading, nothing inline, nothing from elsewhere, one word about the law."""
    assert len(re.findall(r"<h1[ >]", text)) == 1
    assert not re.search(r"<style|<script(?![^>]*\bsrc=)|\sstyle=|\son[a-z]+=|javascript:", text)
    assert not re.search(r"(src|href|action|content)=[\"']?(https?:)?//", text)
    assert text.count("local code and licensed practice decide") == 1
    assert 'lang="en"' in text
    assert 'href="#main"' in text
    assert re.search(r'<main id="main"', text)
    ids = re.findall(r'\sid="([^"]+)"', text)
    assert len(ids) == len(set(ids)), sorted({one for one in ids if ids.count(one) > 1})
    for name in re.findall(r'<label[^>]* for="([^"]+)"', text):
        assert name in ids
    for names in re.findall(r'aria-(?:describedby|labelledby)="([^"]+)"', text):
        assert set(names.split()) <= set(ids), names
    for name in re.findall(r'href="#([^"]+)"', text):
        assert name in ids


@pytest.mark.parametrize("path", PAGES)
async def test_a_plain_page_is_whole(client, path):
    page = await client.get(path)
    assert page.status_code == 200
    assert_whole_page(page.text)


async def test_the_first_page_holds_the_worked_example_and_its_verdict(client):
    page = await client.get("/")
    assert 'class="sentence"' in page.text
    assert 'value="22.3"' in page.text
    assert 'action="/job" method="get"' in page.text


async def test_every_field_of_the_job_is_in_the_form_once(client):
    names = [field.name for group in OPEN_GROUPS + FOLDED_GROUPS for field in group.fields]
    assert sorted(names) == sorted(JobIn.model_fields)
    text = (await client.get("/")).text
    for name in names:
        assert f'name="{name}"' in text


async def test_the_answer_is_a_whole_page_led_by_the_verdict(client, query):
    page = await client.get("/job", params=query)
    assert page.status_code == 200
    assert_whole_page(
        page.text.replace("This sheet is an aid, not a certificate: local code and licensed practice", "")
    )
    told = (await client.get("/job.json", params=query)).json()
    heading = re.search(r"<h1[^>]*>(.*?)</h1>", page.text, re.DOTALL)[1]
    assert told["verdict"]["sentence"][:20] in heading
    for caution in told["cautions"]:
        assert caution["title"] in page.text
    assert page.text.count("<figure") == 2
    assert page.text.count('role="img"') == 2
    assert "nan" not in re.sub(r"<[^>]+>", " ", page.text).split()


async def test_the_form_under_an_answer_keeps_what_was_typed(client, query):
    page = await client.get("/job", params={**query, "module_voc_v": "22,0"})
    assert page.status_code == 200
    assert 'value="22,0"' in page.text


async def test_the_sheet_says_what_to_fit_where_and_what_to_read(client, query):
    page = await client.get("/sheet", params=query)
    assert page.status_code == 200
    assert_whole_page(page.text)
    for words in (
        "anode to the array, band to the battery",
        "positive lead",
        "Fuse:",
        "panel side of the controller",
        "mA",
        "/job?",
    ):
        assert words in page.text


async def test_head_is_get_without_a_body(client):
    answer = await client.head("/method")
    assert answer.status_code == 200
    assert answer.content == b""


@pytest.mark.parametrize("controller", ["direct", "series", "mppt"])
async def test_every_kind_of_controller_makes_a_page_and_a_sheet(client, query, controller):
    for path in ("/job", "/sheet"):
        page = await client.get(path, params={**query, "controller": controller})
        assert page.status_code == 200
        assert len(re.findall(r"<h1[ >]", page.text)) == 1


async def test_a_job_that_nothing_survives_makes_a_page_and_a_sheet(client, query):
    cooked = {**query, "box": "stated", "box_day_c": "118", "candidates": "1N5819"}
    for path in ("/job", "/sheet", "/job.json"):
        assert (await client.get(path, params=cooked)).status_code == 200


async def test_security_headers_stand_on_every_kind_of_response(client, query):
    long = "a" * 33_000
    answers = [
        await client.get("/"),
        await client.get("/static/css/site.css"),
        await client.get("/static/none.css"),
        await client.get("/healthz"),
        await client.get("/favicon.ico"),
        await client.get("/job.json", params=query),
        await client.get("/job.json"),
        await client.get("/nothing"),
        await client.post("/method"),
        await client.get(f"/job?{long}"),
        await client.post("/api/v1/job", content=b" " * 300_000),
        await client.get("/api/openapi.json"),
    ]
    assert [a.status_code for a in answers] == [200, 200, 404, 200, 200, 200, 422, 404, 405, 414, 413, 200]
    for answer in answers:
        for name, value in SECURITY_HEADERS.items():
            assert answer.headers[name] == value
        assert "unsafe" not in answer.headers["content-security-policy"]


async def test_health_is_told_at_once(client):
    answer = await client.get("/healthz")
    assert answer.json()["status"] == "ok"
    assert answer.json()["version"]


async def test_static_files_keep_for_a_year_under_their_fingerprint(client):
    page = await client.get("/")
    for address in re.findall(r'(?:href|src)="(/static/[^"]+)"', page.text):
        answer = await client.get(address)
        assert answer.status_code == 200
        assert answer.headers["cache-control"] == "public, max-age=31536000"


async def test_the_app_starts_and_stops_with_its_warm_up(monkeypatch):
    warmed = []
    monkeypatch.setattr("server.web.app._warm", warmed.append)
    app = create_app()
    sent = []

    async def receive():
        return {"type": "lifespan.startup" if not sent else "lifespan.shutdown"}

    async def send(message):
        sent.append(message["type"])

    await app({"type": "lifespan", "asgi": {"version": "3.0"}, "state": {}}, receive, send)
    assert sent == ["lifespan.startup.complete", "lifespan.shutdown.complete"]


async def test_a_positive_earth_moves_the_diode_into_the_negative_lead(client, query):
    page = await client.get("/sheet", params={**query, "earthing": "positive"})
    assert "negative lead" in page.text
    assert "band to the array’s negative" in page.text
    assert "band to the battery" not in page.text
