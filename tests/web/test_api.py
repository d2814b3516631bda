import json
import math

import anyio
import pytest

from server.errors import Overloaded
from server.web.app import create_app
from server.web.examples import EXAMPLES
from server.web.work import Desk

pytestmark = pytest.mark.anyio


def every_number(value):
    if isinstance(value, dict):
        for inner in value.values():
            yield from every_number(inner)
    elif isinstance(value, list):
        for inner in value:
            yield from every_number(inner)
    elif isinstance(value, float):
        yield value


async def test_a_job_is_judged_the_same_by_address_and_by_body(client, job, query):
    by_post = await client.post("/api/v1/job", json=job)
    by_get = await client.get("/job.json", params=query)
    assert by_post.status_code == by_get.status_code == 200
    assert by_post.json() == by_get.json()


async def test_a_decimal_comma_is_a_decimal_comma(client, query):
    plain = await client.get("/job.json", params=query)
    comma = await client.get("/job.json", params={**query, "module_vmp_v": "18,2", "peak_sun_h": "4,2"})
    assert comma.json() == plain.json()


async def test_the_answer_holds_inputs_verdict_ledgers_audit_and_links(client, job):
    told = (await client.post("/api/v1/job", json=job)).json()
    assert told["inputs"] == job
    assert {"kind", "sentence", "choice", "stable"} <= set(told["verdict"])
    keys = [item["key"] for item in told["candidates"]]
    assert {"10sq050", "sb560", "10a10", "none", "perfect-valve"} == set(keys)
    for item in told["candidates"]:
        assert len(item["typical"]["net_wh"]) == len(told["facts"]["periods"])
        assert (item["part"] is None) == (item["key"] in ("none", "perfect-valve"))
    assert told["engine_version"]
    assert told["audit"]["cells"] > 0
    for address in told["links"].values():
        assert (await client.get(address)).status_code == 200
    assert (await client.get(told["links"]["json"])).json() == told


async def test_own_diodes_and_single_diode_parameters_survive_the_link(client, job):
    own = {
        "name": "S45, axial & spare",
        "technology": "schottky",
        "vrrm_v": 45,
        "forward": [{"current_a": 1, "voltage_v": 0.34}, {"current_a": 15, "voltage_v": 0.52}],
        "reverse": [{"reverse_v": 45, "current_a": 8e-5}, {"reverse_v": 45, "current_a": 8e-3, "junction_c": 100}],
        "if_av_a": 15,
        "rth_ja_c_per_w": 28,
    }
    single = {"photo_a": 5.91, "saturation_a": 4e-10, "slope_v": 0.94, "series_ohm": 0.2, "shunt_ohm": 150}
    asked = {**job, "own_diodes": [own], "single_diode": single}
    told = (await client.post("/api/v1/job", json=asked)).json()
    assert any(item["title"] == own["name"] for item in told["candidates"])
    assert (await client.get(told["links"]["json"])).json() == told
    page = await client.get(told["links"]["page"])
    assert "S45, axial &amp; spare" in page.text


async def test_numbers_that_do_not_exist_are_null(client, job):
    answer = await client.post("/api/v1/job", json={**job, "candidates": ["1N4001", "1N5819"]})
    assert answer.status_code == 200
    assert "NaN" not in answer.text
    assert "Infinity" not in answer.text
    assert all(math.isfinite(x) for x in every_number(answer.json()))


async def test_faults_and_readings_after_fitting_are_told(client, job):
    asked = {**job, "candidates": ["10SQ050"], "loop_ohm": 0.1, "battery_absorption_v": 14.4, "other_source_v": 15.5}
    told = (await client.post("/api/v1/job", json=asked)).json()
    cases = {(case["code"], case["bus"]): case for case in told["faults"]["cases"]}
    # Ohm's law: 14.4 V through 0.1 ohm. One string has no other to feed it. Nothing is given to hold it against.
    shorted = cases["string_shorted", "bank connected"]
    assert shorted["without_a"] == pytest.approx(144)
    assert shorted["maximum_a"] < 0.1
    assert shorted["allowed_a"] is None
    assert cases["string_shorted", "bank disconnected"]["without_a"] == 0
    assert told["faults"]["fuse_window_a"] == pytest.approx([1.4 * 5.9, 2.4 * 5.9])
    # Ohm's law again, and ten turns through a clamp.
    test = told["field_test"]
    assert test["shunt_ohm"] == [0.1, 1.0]
    assert test["shunt_pass_v"] == pytest.approx([0.1 * test["pass_below_a"], test["pass_below_a"]])
    assert test["clamp_pass_a"] == pytest.approx(10 * test["pass_below_a"])
    assert [one["code"] for one in test["night"]] == ["designed", "shorted", "reversed", "none"]
    assert [one["current_a"] for one in test["day"]] == pytest.approx([5.5 / 4, 5.5 / 2, 5.5])
    source = told["second_source"]
    assert source["bus_v"] == 15.5
    assert source["typical_a"] <= source["maximum_a"] <= source["without_a"]


async def test_faults_readings_and_heat_that_do_not_exist_are_null(client, job):
    bare = {**job, "loop_ohm": 0.0, "cable_one_way_m": None, "cable_mm2": None}
    told = (await client.post("/api/v1/job", json={k: v for k, v in bare.items() if v is not None})).json()
    assert told["second_source"] is None
    case = next(one for one in told["faults"]["cases"] if one["code"] == "string_shorted")
    assert case["without_a"] is None  # nothing holds a short back where there is no cable
    by_key = {item["key"]: item for item in told["candidates"]}
    assert by_key["none"]["reverse_heat"] is None
    assert by_key["none"]["sink_to_buy_c_per_w"] is None
    # A part so leaky that it heats itself past any limit in air of 110 °C; without it a shunt regulator is not safe.
    leaky = {
        "name": "leaky",
        "technology": "schottky",
        "vrrm_v": 45,
        "forward": [{"current_a": 1, "voltage_v": 0.3}, {"current_a": 15, "voltage_v": 0.45}],
        "reverse": [{"reverse_v": 45, "current_a": 1e-3}, {"reverse_v": 45, "current_a": 0.1, "junction_c": 100}],
        "rth_ja_c_per_w": 60,
    }
    cooked = {**job, "candidates": [], "own_diodes": [leaky], "box": "stated", "box_day_c": 110}
    told = (await client.post("/api/v1/job", json=cooked)).json()
    assert told["verdict"]["kind"] == "nothing_safe"
    assert told["field_test"] is None
    heat = next(item["reverse_heat"] for item in told["candidates"] if item["title"] == "leaky")
    assert heat["stable_typical_c"] is None
    assert heat["tipping_typical_c"] is None
    assert heat["critical_ambient_typical_c"] < 110


async def test_the_catalogue_is_told_whole_with_sources_and_what_was_left_out(client):
    told = (await client.get("/api/v1/diodes")).json()
    assert told == (await client.get("/diodes.json")).json()
    assert len(told["parts"]) > 50
    for part in told["parts"]:
        assert part["sheets"]
        assert part["ratings"]["vrrm_v"] > 0
    for item in told["unfitted"]:
        assert item["reason"]


async def test_the_description_for_programs_names_every_address(client):
    told = (await client.get("/api/openapi.json")).json()
    assert {"/api/v1/job", "/api/v1/loop", "/api/v1/diodes", "/job.json", "/healthz"} == set(told["paths"])
    schemas = told["components"]["schemas"]
    assert {"JobIn", "FaultStudy", "FaultCase", "FieldTest", "NightWindow", "DropReading"} <= set(schemas)
    answer = schemas["StudyOut"]
    assert {"faults", "field_test", "second_source"} <= set(answer["required"])
    for name, record in (("field_test", "FieldTest"), ("second_source", "SecondSource")):
        kinds = answer["properties"][name]["anyOf"]
        assert kinds == [{"$ref": f"#/components/schemas/{record}"}, {"type": "null"}]
    assert {"sink_to_buy_c_per_w", "reverse_heat"} <= set(schemas["CandidateOut"]["required"])


async def test_the_examples_on_the_page_about_the_api_work(client):
    for example in EXAMPLES:
        if example.body:
            answer = await client.post(example.path, json=json.loads(example.body))
            assert answer.status_code == 200, answer.text[:300]


async def test_a_full_queue_answers_503_with_a_time_to_come_back(asking, job, query, assert_error_shape, monkeypatch):
    gate = anyio.Event()
    desk = Desk(workers=1, max_waiting=1)

    async def held(*_, **__):
        await gate.wait()

    monkeypatch.setattr("server.web.work.anyio.to_thread.run_sync", held)
    async with asking(create_app(desk)) as client, anyio.create_task_group() as tasks:
        tasks.cancel_scope.deadline = anyio.current_time() + 20
        for strings in (1, 2):
            tasks.start_soon(lambda n: desk.run(lambda: n), strings)
        await anyio.wait_all_tasks_blocked()
        refused = await client.post("/api/v1/job", json=job)
        assert_error_shape(refused, 503)
        assert int(refused.headers["retry-after"]) >= 1
        assert "default-src 'none'" in refused.headers["content-security-policy"]
        page = await client.get("/job", params=query)
        assert page.status_code == 503
        assert int(page.headers["retry-after"]) >= 1
        assert 'value="22.0"' in page.text
        assert (await client.get("/")).status_code == 200
        assert (await client.get("/healthz")).status_code == 200
        with pytest.raises(Overloaded):
            await desk.run(lambda: None)
        gate.set()


async def test_a_study_asked_for_again_is_not_computed_again(client, job, kept_desk, monkeypatch):
    first = await client.post("/api/v1/job", json=job)

    def never(_):
        raise AssertionError("computed twice")

    monkeypatch.setattr("server.web.work.study.run", never)
    assert (await client.post("/api/v1/job", json=job)).json() == first.json()
