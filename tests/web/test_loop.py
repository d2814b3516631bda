import pytest

pytestmark = pytest.mark.anyio

# KC200GT at 1000 W/m2 and 25 °C: IL, I0, n = 1.3 on 54 cells, Rs, Rsh as published, and 0.0256926 V of kT/q.
KC200GT = {
    "photo_a": 8.2144,
    "saturation_a": 9.825e-8,
    "slope_v": 1.3 * 54 * 0.0256926,
    "series_ohm": 0.221,
    "shunt_ohm": 415.405,
}
LABEL = {"module_voc_v": 22.0, "module_isc_a": 5.9, "module_vmp_v": 18.2, "module_imp_a": 5.5, "cells": 36}
BODY = {
    "string": {"single_diode": KC200GT, "dark_shunt_ohm": None},
    "diodes": ["none"],
    "battery_v": 25.2,
    "poa_w_m2": [1000],
}


async def ask(client, **change):
    return await client.post("/api/v1/loop", json={**BODY, **change})


async def test_a_bare_module_gives_the_published_current(client):
    told = (await ask(client)).json()
    (wire,) = told["diodes"]
    assert wire["converged"] == [True]
    # 7.8486 A in print; its parameters, given to four or five digits, leave 5e-4 A open.
    assert wire["current_a"][0] == pytest.approx(7.8486, abs=5e-4)
    assert wire["diode_v"] == [0.0]


async def test_power_is_accounted_for_in_every_cell(client):
    told = (
        await ask(
            client,
            diodes=["none", "perfect", "10SQ050", "10A10"],
            poa_w_m2=[1000, 300, 0],
            cell_c=[50, 30, 10],
            battery_v=[25.2, 25.2, 25.5],
            box_c=40,
            rth_c_per_w=20,
            loop_ohm=0.05,
        )
    ).json()
    assert told["rows"] == 3
    assert told["not_converged"] == 0
    for diode in told["diodes"]:
        for row in range(3):
            out_w = diode["bus_w"][row] + diode["diode_w"][row] + diode["cable_w"][row]
            assert diode["string_w"][row] == pytest.approx(out_w, abs=1e-6)
            assert abs(diode["imbalance_w"][row]) < 1e-6
    by_name = {diode["name"]: diode for diode in told["diodes"]}
    assert by_name["none"]["current_a"][2] <= 0 == by_name["perfect"]["current_a"][2]
    assert by_name["10SQ050"]["junction_c"][0] > 40


async def test_a_dark_module_takes_current_back_through_its_shunt_only_where_it_has_one(client):
    dark = {"poa_w_m2": [0], "cell_c": 10}
    shunted = {"single_diode": KC200GT, "dark_shunt_ohm": 1000}
    without = (await ask(client, **dark)).json()["diodes"][0]["current_a"][0]
    with_one = (await ask(client, string=shunted, **dark)).json()["diodes"][0]["current_a"][0]
    assert with_one - without == pytest.approx(-25.2 / 1000, rel=0.01)


async def test_a_label_will_do_for_the_string(client):
    told = (await ask(client, string=LABEL, battery_v=12.0)).json()
    # Far below the knee a string gives its short-circuit current, less what the shunt takes.
    assert told["diodes"][0]["current_a"][0] == pytest.approx(5.9, rel=0.02)


OWN = {"name": "mine", "technology": "schottky", "vrrm_v": 40, "forward": [{"current_a": 1, "voltage_v": 0.4}]}


@pytest.mark.parametrize(
    ("change", "field", "says"),
    [
        ({"diodes": ["10SQ05O"]}, "diodes[0]", ["10SQ050"]),
        ({"diodes": []}, "diodes", ["at least 1"]),
        ({"diodes": ["none"] * 51}, "diodes", ["51", "50"]),
        ({"diodes": ["none"] * 2, "poa_w_m2": [0] * 10_001}, "diodes", ["20000"]),
        (
            {"diodes": [{**OWN, "reverse": [{"reverse_v": 40, "current_a": 1e-4}], "vrrm_v": -1}]},
            "diodes[0].vrrm_v",
            ["-1"],
        ),
        ({"diodes": [{**OWN, "vrm_v": 1}]}, "diodes[0].vrm_v", ["vrrm_v"]),
        ({"battery_v": [12, 13], "poa_w_m2": [1, 2, 3]}, "battery_v", ["2 values", "3"]),
        ({"battery_v": -1}, "battery_v[0]", ["-1 V", "0 to 5000"]),
        ({"poa_w_m2": [1000, 5000]}, "poa_w_m2[1]", ["5000", "2000"]),
        ({"loop_ohm": -1}, "loop_ohm", ["-1"]),
        ({"rth_c_per_w": 1e308}, "rth_c_per_w", ["1000"]),
        ({"string": {}}, "string.module_voc_v", ["missing"]),
        ({"string": {**LABEL, "module_vmp_v": 30}}, "string.module_vmp_v", ["30 V", "22 V"]),
        ({"string": {"single_diode": {**KC200GT, "slope_v": 0}}}, "string.single_diode.slope_v", ["0 V"]),
        ({"string": {"single_diode": KC200GT}}, "string.cells", ["missing"]),
        ({"strin": {}}, "strin", ["string"]),
        ({"battery_v": "NaN"}, "battery_v[0]", ["finite"]),
    ],
)
async def test_what_makes_no_circuit_is_refused(client, assert_error_shape, change, field, says):
    assert_error_shape(await ask(client, **change), 422, field, says)
