import html
import math

import pytest

from server.web.app import create_app

pytestmark = pytest.mark.anyio

# What is changed in a good job, the field that must be named, and what its sentence must say.
BAD = [
    ({"module_vocv": "22"}, "module_vocv", ["not known", "module_voc_v"]),
    ({"module_voc_v": None}, "module_voc_v", ["missing"]),
    ({"module_voc_v": "twenty"}, "module_voc_v", ["twenty", "not a number"]),
    ({"module_voc_v": "nan"}, "module_voc_v", ["nan", "finite"]),
    ({"module_voc_v": "inf"}, "module_voc_v", ["inf", "finite"]),
    ({"module_voc_v": "-22"}, "module_voc_v", ["-22", "0.4 to 500"]),
    ({"module_voc_v": "1e308"}, "module_voc_v", ["1e+308", "500"]),
    ({"module_vmp_v": "23"}, "module_vmp_v", ["23 V", "22 V"]),
    ({"strings": "2.5"}, "strings", ["2.5", "whole number"]),
    ({"strings": "1" + "0" * 30}, "strings", ["above"]),
    ({"controller": "shunted"}, "controller", ["shunted", "direct, shunt, series, mppt", "did you mean shunt"]),
    ({"chemistry": "wet"}, "chemistry", ["wet", "flooded"]),
    ({"candidates": "10SQ05O"}, "candidates", ["10SQ05O", "10SQ050"]),
    ({"climate": "grid", "lat_deg": "95", "lon_deg": "0"}, "lat_deg", ["95", "-90", "90"]),
    ({"peak_sun_h": None, "preset": "london", "lat_deg": "-20", "lon_deg": "0"}, "lat_deg", ["-20", "london", "clear"]),
    ({"module_voc_v": "44.8", "module_vmp_v": "37", "cells": "36"}, "cells", ["36", "44.8", "56 to 179"]),
    ({"peak_sun_h": None, "preset": "atlantis"}, "preset", ["atlantis", "london"]),
    ({"peak_sun_h": "40"}, "peak_sun_h", ["40", "daylight"]),
    ({"own_diodes": "[{"}, "own_diodes", ["JSON"]),
    ({"own_diodes": '[{"name": "x", "technology": "schottky"}]'}, "own_diodes[0].vrrm_v", ["missing"]),
    (
        {"own_diodes": '[{"name": "x", "technologie": "schottky", "vrrm_v": 40}]'},
        "own_diodes[0].technologie",
        ["technology"],
    ),
    (
        {"climate": "monthly", "lat_deg": "45", "lon_deg": "0", "kt_monthly": "0.4 0.5"},
        "air_min_c_monthly",
        ["missing"],
    ),
]


def changed(good, change):
    return {name: value for name, value in {**good, **change}.items() if value is not None}


@pytest.mark.parametrize(("change", "field", "says"), BAD)
async def test_a_bad_value_is_named_with_value_and_bound_by_address_and_by_body(
    client, job, query, assert_error_shape, change, field, says
):
    by_get = await client.get("/job.json", params=changed(query, change))
    by_post = await client.post("/api/v1/job", json=changed(job, change))
    assert assert_error_shape(by_get, 422, field, says)["errors"] == assert_error_shape(by_post)["errors"]


@pytest.mark.parametrize(("change", "field", "says"), BAD)
async def test_the_page_says_the_same_and_keeps_what_was_typed(client, query, change, field, says):
    sent = changed(query, change)
    told = (await client.get("/job.json", params=sent)).json()["errors"]
    page = await client.get("/job", params=sent)
    assert page.status_code == 422
    assert page.headers["content-type"].startswith("text/html")
    text = html.unescape(page.text)
    assert 'role="alert"' in text
    for one in told:
        assert one["sentence"] in text
    for name in ("module_isc_a", "battery_ah", "night_air_c", "cable_mm2"):
        assert f'name="{name}"' in text
        assert f'value="{sent[name]}"' in text
    if field in sent and field == "module_voc_v":
        assert f'value="{sent[field]}"' in text
        assert f'id="{field}-error"' in text
    sheet = await client.get("/sheet", params=sent)
    assert sheet.status_code == 422
    assert told[0]["sentence"] in html.unescape(sheet.text)


async def test_numbers_that_json_should_not_hold_are_refused(client, job, assert_error_shape):
    for bad in ("NaN", "Infinity", "1e999"):
        body = '{"module_isc_a": 5.9, "module_voc_v": ' + bad + "}"
        answer = await client.post("/api/v1/job", content=body, headers={"content-type": "application/json"})
        assert_error_shape(answer, 422, "module_voc_v", ["finite"])


@pytest.mark.parametrize("value", [True, [22], {"v": 22}, None, 10**400])
async def test_a_wrong_kind_of_value_is_refused(client, job, assert_error_shape, value):
    answer = await client.post("/api/v1/job", json={**job, "strings": value})
    assert_error_shape(answer, 422, "strings")


async def test_a_whole_number_of_thousands_of_digits_is_refused(client, assert_error_shape):
    body = '{"strings": 1' + "0" * 6000 + "}"
    answer = await client.post("/api/v1/job", content=body, headers={"content-type": "application/json"})
    assert_error_shape(answer, 400)


async def test_half_a_character_is_refused_and_can_be_told(client, job, assert_error_shape):
    body = '{"controller": "\\ud800", "preset": "\\udfff"}'
    answer = await client.post("/api/v1/job", content=body, headers={"content-type": "application/json"})
    assert_error_shape(answer, 422, "controller")


async def test_broken_json_and_other_kinds_of_body_are_refused(client, job, assert_error_shape):
    json_type = {"content-type": "application/json"}
    assert_error_shape(await client.post("/api/v1/job", content="{", headers=json_type), 422, None)
    assert_error_shape(await client.post("/api/v1/job", content="[1]", headers=json_type), 422)
    assert_error_shape(await client.post("/api/v1/job", content="[" * 20_000, headers=json_type), 400)
    assert_error_shape(await client.post("/api/v1/job", content="a=1", headers={"content-type": "text/plain"}), 415)
    assert_error_shape(await client.post("/api/v1/job", data={"a": "1"}), 415)
    assert_error_shape(await client.post("/api/v1/job", content=b"{}"), 415)


async def test_a_name_given_twice_is_refused(client, query, assert_error_shape):
    answer = await client.get("/job.json", params=[*query.items(), ("strings", "1"), ("strings", "2")])
    assert_error_shape(answer, 422, "strings", ["2 times"])


async def test_unknown_addresses_and_methods_are_refused_in_one_shape(client, assert_error_shape):
    assert_error_shape(await client.get("/api/v1/jub"), 404)
    assert_error_shape(await client.get("/nothing.json"), 404)
    refused = await client.get("/api/v1/job")
    assert_error_shape(refused, 405)
    assert refused.headers["allow"] == "POST"
    page = await client.get("/nothing")
    assert page.status_code == 404
    assert page.text.count("<h1") == 1


async def test_too_much_is_refused_declared_or_not(client, assert_error_shape):
    async def drip():
        for _ in range(40):
            yield b" " * 10_000

    json_type = {"content-type": "application/json"}
    big = await client.post("/api/v1/job", content=b" " * 300_000, headers=json_type)
    assert_error_shape(big, 413)
    assert_error_shape(await client.post("/api/v1/job", content=drip(), headers=json_type), 413)
    assert_error_shape(await client.get("/job.json?" + "a" * 33_000), 414)
    assert (await client.get("/job?" + "a" * 33_000)).status_code == 414


async def test_a_bug_is_told_without_its_trace_and_logged(asking, query, job, assert_error_shape, caplog, monkeypatch):
    def broken(_):
        raise ZeroDivisionError("secret detail")

    monkeypatch.setattr("server.web.work.study.run", broken)
    async with asking(create_app()) as client:
        answer = await client.post("/api/v1/job", json=job)
        page = await client.get("/job", params=query)
    assert_error_shape(answer, 500)
    assert "secret" not in answer.text
    assert "Zero" not in answer.text
    assert page.status_code == 500
    assert "secret" not in page.text
    assert "secret detail" in caplog.text


async def test_nothing_in_an_error_page_is_markup(client, query):
    nasty = '"><script>alert(1)</script>'
    page = await client.get("/job", params={**query, "preset": nasty, nasty: nasty, "own_diodes": nasty})
    assert page.status_code == 422
    assert "<script>alert" not in page.text
    assert not math.isnan(len(page.text))
