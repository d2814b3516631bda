import html
import re

import pytest
from worked_jobs import cabin, repeater

from server.web import words
from server.web.app import create_app
from server.web.fields import FOLDED_GROUPS, OPEN_GROUPS
from server.web.guard import SECURITY_HEADERS
from server.web.schemas import JobIn, links_of

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


@pytest.mark.parametrize(
    ("change", "careful", "kicker"),
    [
        ({"controller": "series", "blocks_at_night": "unknown"}, True, "Ask the controller first"),
        ({"controller": "series", "blocks_at_night": "no"}, False, "Fit a diode"),
        ({"controller": "direct", "battery_ah": "10"}, True, "Fit a diode"),  # 3 % of 10 Ah is 0.3 A
        ({"controller": "direct", "battery_ah": "1000"}, False, "Fit a diode"),
    ],
)
async def test_a_verdict_with_something_to_do_first_is_set_apart(client, query, change, careful, kicker):
    text = (await client.get("/job", params={**query, **change})).text
    panel = re.search(r'<section class="verdict ([^"]+)"[^>]*>\s*<p class="kicker">([^<]+)', text)
    assert panel.group(2) == kicker
    assert ("with-care" in panel.group(1)) == careful


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
    for phrase in (
        "anode to the array, band to the battery",
        "positive lead",
        "Fuse:",
        "panel side of the controller",
        "mA",
        "/job?",
    ):
        assert phrase in page.text


def words_of(page):
    """What a reader sees, markup and line ends aside."""
    return " ".join(html.unescape(re.sub(r"<[^>]+>", " ", page.text)).split())


async def test_faults_stand_on_the_page_with_what_is_allowed_and_an_outcome_in_words(client):
    job = JobIn(**repeater(max_series_fuse_a=20, cable_ampacity_a=30))
    page = await client.get(links_of(job).page)
    text = words_of(page)
    told = (await client.get(links_of(job).json_)).json()["faults"]
    for case in told["cases"]:
        assert case["title"] in text
        assert case["bus"] in text
        assert case["sentence"][1:] in text
    assert "Held against 20 A" in text
    # three strings push 3 × 1.25 × 9.8 A into a dead one; behind a sound diode that is within 20 A
    assert re.search(r" 36\.8 A [\d.]+–[\d.]+ µA 20 A ● within it", text)
    assert "✕ not limited" in text
    for sentence in (told["fuse_sentence"], told["battery_fuse_sentence"], told["last_word"]):
        assert sentence[1:] in text


async def test_without_a_diode_the_faults_are_judged_bare(client):
    job = JobIn(**cabin(max_series_fuse_a=10))
    page = await client.get(links_of(job).page)
    assert "With the choice" not in page.text
    assert "✕ beyond it" in words_of(page)  # the other string pushes 1.25 × 9.8 A past 10 A
    assert "Held against 10 A" in words_of(page)


async def test_page_and_sheet_print_the_limits_that_a_reading_must_pass(client):
    job = JobIn(**repeater())
    links = links_of(job)
    test = (await client.get(links.json_)).json()["field_test"]
    page, sheet = await client.get(links.page), await client.get(links.sheet)
    for text in (words_of(page), words_of(sheet)):
        assert f"{words.milli(test['pass_below_a'])} mA" in text
        for volts in test["shunt_pass_v"]:
            assert f"{words.milli(volts)} mV" in text
        assert f"{words.milli(test['clamp_pass_a'])} mA" in text
        assert "10 MΩ voltmeter" in text
        for one in test["day"]:
            assert f"{words.fig(one['low_v'], 2)}–{words.fig(one['high_v'], 2)} V" in text
    assert sheet.text.count('class="box"') == 4 * (1 + 2 + 1 + 3 + 1 + 1)  # four strings; the windows need no box


async def test_where_windows_are_too_near_the_day_is_named_instead(client, query):
    # In a hot night this low drop leaks as much as a bare string takes at the least.
    near = {**query, "candidates": "MBR4045WT", "night_air_c": "60"}
    test = (await client.get("/job.json", params=near)).json()["field_test"]
    assert test["pass_below_a"] is None
    for path in ("/job", "/sheet"):
        text = words_of(await client.get(path, params=near))
        assert "too near" in text
        assert "0 V across it" in text


async def test_the_catalogue_figure_of_a_heatsink_is_told_where_it_differs_by_a_tenth(client, query):
    # Four strings in hot air leave their sinks little rise; one part in mild air has all the rise it likes.
    near = {**query, "candidates": "MBR4045WT"}
    for address, params, differs in ((links_of(JobIn(**repeater())), None, True), (None, near, False)):
        page, sheet, told = [
            await client.get(getattr(address, name) if address else path, params=params)
            for name, path in (("page", "/job"), ("sheet", "/sheet"), ("json_", "/job.json"))
        ]
        choice = next(c for c in told.json()["candidates"] if c["key"] == told.json()["verdict"]["choice"])
        needed, quoted = choice["sink_needed_c_per_w"], choice["sink_to_buy_c_per_w"]
        assert (abs(quoted - needed) > 0.1 * needed) == differs
        assert ("buy one of" in words_of(page)) == differs
        assert ("in a catalogue" in words_of(sheet)) == differs


async def test_a_part_that_needs_no_heatsink_is_not_sold_one(client, query):
    cool = {**query, "candidates": "LM74700-Q1 + IRFP4310Z", "controller": "series"}
    assert "It needs no heatsink" in words_of(await client.get("/job", params=cool))
    sheet = words_of(await client.get("/sheet", params=cool))
    assert "no heatsink is needed" in sheet
    assert "heatsink of at most" not in sheet


async def test_heat_in_reverse_and_a_second_source_are_told(client, query):
    page = words_of(await client.get("/job", params={**query, "other_source_v": "15.5"}))
    assert "Reversed while hot" in page
    assert "No stable point in air hotter than" in page
    assert "Second source. At 15.5 V by night" in page
    assert "a second source, up to 15.5 V" in words_of(
        await client.get("/sheet", params={**query, "other_source_v": "15.5"})
    )


@pytest.mark.parametrize(
    ("value", "shown"),
    [(221.2, "221 A"), (0.99996, "1.00 A"), (0.0085, "8.5 mA"), (0.00099999, "1.0 mA"), (6.7e-5, "67 µA"), (0, "0 A")],
)
def test_a_small_current_is_told_in_the_unit_a_meter_shows(value, shown):
    assert words.small(value, "A") == shown


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
