import html
import json
import math
import re

import pytest
from web.test_pages import assert_whole_page

from server.catalog.corners import LOWEST_V
from server.catalog.datasheet import load_types
from server.catalog.parts import load_parts, unfitted
from server.web import diode_words, one_diode
from server.web.curves import LogScale, decade
from server.web.shelf import COLUMNS, LABELS, SORTS, ShelfIn

pytestmark = pytest.mark.anyio

PARTS = {part.key: part for part in load_parts()}
LEFT_OUT = {one_diode.slug(item.type): item for item in unfitted()}


def strict(text):
    """JSON that every program can read: NaN and Infinity are none."""

    def refuse(name):
        raise AssertionError(f"{name} is not JSON")

    return json.loads(text, parse_constant=refuse)


def keys_of(page):
    """Keys of the rows of the list, in order."""
    return re.findall(r'<tr id="([^"]+)">', page.text)


async def listed(client, **asked):
    page = await client.get("/diodes", params=asked)
    assert page.status_code == 200, page.text[:300]
    return keys_of(page)


def text_of(page):
    """What a reader sees, spaces made plain."""
    plain = html.unescape(re.sub(r"<[^>]+>", " ", page.text))
    return re.sub(r"\s+", " ", plain)


def carried_a(part):
    """By the printed rating: a package, or two legs side by side where the rating is for one."""
    if part.if_av_a is None or (part.if_av_per == "package" and part.parallel_legs == min(part.dies, 2)):
        return part.if_av_a
    return part.if_av_a * part.parallel_legs


# --- the list ---------------------------------------------------------------------------------------------------------


async def test_the_list_is_a_whole_page_and_light(client):
    page = await client.get("/diodes")
    assert_whole_page(page.text)
    assert len(page.content) < 60_000


async def test_the_list_has_every_part_once_under_its_key_and_links_to_its_page(client):
    page = await client.get("/diodes")
    assert sorted(keys_of(page)) == sorted(PARTS)
    for key in [*PARTS, *LEFT_OUT]:
        assert page.text.count(f'href="/diodes/{key}"') == 1
        assert page.text.count(f'id="{key}"') == 1


@pytest.mark.parametrize("technology", sorted({part.technology for part in load_parts()}))
async def test_a_technology_is_all_of_it_and_nothing_else(client, technology):
    expected = {key for key, part in PARTS.items() if part.technology == technology}
    assert set(await listed(client, technology=technology)) == expected


@pytest.mark.parametrize("volts", ["60", "44,5", " 1000 ", "1600", "20000"])
async def test_vrrm_at_least_takes_a_decimal_comma_and_keeps_the_bound_itself(client, volts):
    least = float(volts.replace(",", "."))
    assert set(await listed(client, vrrm_min_v=volts)) == {k for k, p in PARTS.items() if p.vrrm_v >= least}


@pytest.mark.parametrize("amps", ["3", "20", "12,5"])
async def test_current_at_least_counts_the_legs_that_work_side_by_side(client, amps):
    least = float(amps.replace(",", "."))
    expected = {k for k, p in PARTS.items() if p.if_av_a is not None and carried_a(p) >= least}
    assert set(await listed(client, if_min_a=amps)) == expected
    assert expected


async def test_letters_are_looked_for_in_package_and_type_in_any_case(client):
    assert set(await listed(client, package="to-247")) == {
        k for k, p in PARTS.items() if "TO-247" in (p.package or "").upper()
    }
    assert set(await listed(client, package="1N58")) == {k for k, p in PARTS.items() if p.type.startswith("1N58")}


async def test_filters_add_up_and_empty_fields_are_left_out(client):
    found = await listed(client, technology="schottky", vrrm_min_v="45", if_min_a="", package="", sort="")
    assert set(found) == {k for k, p in PARTS.items() if p.technology == "schottky" and p.vrrm_v >= 45}


async def test_an_order_runs_both_ways_and_what_is_not_printed_stands_last(client):
    for sort, value in (("vrrm_v", lambda p: p.vrrm_v), ("if_a", carried_a), ("sheets", lambda p: len(p.sheets))):
        for sign in ("", "-"):
            values = [value(PARTS[key]) for key in await listed(client, sort=sign + sort)]
            assert len(values) == len(PARTS)
            told = [v for v in values if v is not None]
            assert told == sorted(told, reverse=bool(sign))
            assert None not in values[: len(told)]


async def test_types_are_in_the_order_of_their_numbers(client):
    found = await listed(client, sort="type", package="sb")
    assert found.index("sb560") < found.index("sb1045") < found.index("sbr30a45ct") < found.index("sbr1045ctl")
    assert await listed(client, sort="-type") == list(reversed(await listed(client, sort="type")))


async def test_the_drop_in_the_list_is_below_the_printed_maximum(client):
    # 10SQ050, Lite-On KDHG01 rev. 1: at most 0.55 V at 10 A, 25 °C.
    page = await client.get("/diodes")
    row = re.search(r'<tr id="10sq050">(.*?)</tr>', page.text, re.DOTALL).group(1)
    cells = re.findall(r"<td>(.*?)</td>", row)
    assert cells[3].startswith("10 ")
    assert "130" in cells[3]
    assert 0.4 < float(cells[4]) < 0.55
    # and at most 50 µA at 50 V, 25 °C: less at 13 V
    assert 0 < float(cells[5]) < float(cells[6]) < 0.05


async def test_heads_are_links_that_keep_the_filters_and_say_how_the_list_is_sorted(client):
    page = await client.get("/diodes", params={"vrrm_min_v": "59,5", "sort": "vrrm_v"})
    assert 'aria-sort="ascending"' in page.text
    (turned,) = re.findall(r'href="([^"]+sort=-vrrm_v)"', page.text)
    again = await client.get(html.unescape(turned))
    assert 'aria-sort="descending"' in again.text
    assert 'value="59.5"' in again.text
    assert sorted(keys_of(again)) == sorted(keys_of(page))


async def test_nothing_found_is_said(client):
    page = await client.get("/diodes", params={"package": "no such case"})
    assert page.status_code == 200
    assert "None of the" in page.text
    assert keys_of(page) == []


@pytest.mark.parametrize(
    ("asked", "field", "says"),
    [
        ({"vrrm_min_v": "abc"}, "vrrm_min_v", "“abc” is not a number"),
        ({"vrrm_min_v": "-1"}, "vrrm_min_v", "below the lowest value taken, 0"),
        ({"vrrm_min_v": "nan"}, "vrrm_min_v", "not a finite number"),
        ({"if_min_a": "1e9"}, "if_min_a", "above the highest value taken, 5000"),
        ({"technology": "shottky"}, "technology", "did you mean schottky?"),
        ({"sort": "weight"}, "sort", "“weight” is no order known here"),
        ({"package": "x" * 61}, "package", "at most 60"),
        ({"vrm_min_v": "40"}, "vrm_min_v", "did you mean vrrm_min_v?"),
        ([("if_min_a", "1"), ("if_min_a", "2")], "if_min_a", "more than once"),
        ({"package": "<script>alert(1)</script>", "sort": '"><b>'}, "sort", "no order known here"),
    ],
)
async def test_nonsense_is_refused_in_a_sentence_and_what_was_typed_is_kept(client, asked, field, says):
    page = await client.get("/diodes", params=asked)
    assert page.status_code == 422
    assert_whole_page(page.text)
    assert says in html.unescape(page.text)
    assert f"<code>{field}</code>" in page.text
    assert "<script>alert" not in page.text
    if field in ShelfIn.model_fields:
        assert 'aria-invalid="true"' in page.text
    assert keys_of(page) == []


def test_every_column_and_field_has_its_words():
    assert set(LABELS) == set(ShelfIn.model_fields)
    assert {name.lstrip("-") for name in SORTS} == {name for name, _, _ in COLUMNS}


# --- one type ---------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("key", sorted(PARTS))
async def test_every_part_has_a_whole_page_and_the_same_as_json(client, key):
    page = await client.get(f"/diodes/{key}")
    assert page.status_code == 200
    assert_whole_page(page.text)
    assert len(page.content) < 60_000
    part = PARTS[key]
    seen = text_of(page)
    assert part.type in seen
    for sheet in part.sheets:
        assert sheet.manufacturer in seen
        assert re.sub(r"\s+", " ", sheet.title) in seen
    for remark in part.warnings:
        assert remark.sentence[1:] in seen
    paths = re.findall(r'<path[^>]* d="([^"]*)"', page.text)
    assert not [d for d in paths if re.search(r"nan|inf|None", d)]
    assert page.text.count('role="img"') == 3
    lines = re.findall(r'class="curve-line c-[tv]\d+( is-maximum)?" d="([^"]*)"', page.text)
    banks = len([volt for volt in (13, 26, 52) if volt <= part.vrrm_v])
    assert len(lines) == 2 * (4 + 4 + banks)
    assert all(len(d) > 100 for _, d in lines) or "Below 1 pA nothing is drawn" in seen
    told = strict((await client.get(f"/diodes/{key}.json")).text)
    assert told["key"] == key
    assert told["ratings"]["vrrm_v"] == part.vrrm_v
    assert len(told["sheet_ratings"]) == len(part.sheets)
    assert len(told["drop_v_by_current_a_and_junction_c"]["typical"]) == 4
    # The fit keeps the corners in order from LOWEST_V up.
    for name, least in (
        ("drop_v_by_current_a_and_junction_c", 0.0),
        ("leakage_a_by_reverse_v_and_junction_c", LOWEST_V),
    ):
        for typical, maximum in zip(told[name]["typical"], told[name]["maximum"], strict=True):
            for x, low, high in zip(told[name]["x"], typical, maximum, strict=True):
                assert low > 0
                assert x < least or low <= high * 1.0001
            assert typical == sorted(typical)
            assert maximum == sorted(maximum)


async def test_what_a_sheet_prints_stands_on_the_page(client):
    # 10SQ050, Lite-On KDHG01 rev. 1 of 2013-04: VF 0.55 V at 10 A, 25 °C; IR 50 µA at 50 V, 25 °C, 10 mA at 100 °C;
    # IF(AV) 10 A at a case of 130 °C; Tj 125 °C, 200 °C in forward only; 28 K/W to air, 11 K/W to case.
    seen = text_of(await client.get("/diodes/10sq050"))
    for words in (
        "KDHG01",
        "REV. 1",
        "2013-04",
        "drop at 10 A 25 °C maximum 0.55 V",
        "leakage at 50 V 25 °C maximum 50 µA",
        "leakage at 50 V 100 °C maximum 10 mA",
        "10 A for the package, case at 130 °C",
        "at most 125 °C with reverse voltage across it; 200 °C with forward current only",
        "28 °C/W junction to air; mounting as printed: typical, JESD-51 test",
        "11 °C/W junction to case",
        "never more than the bare string takes",
    ):
        assert words in seen


@pytest.mark.parametrize("item", load_types(), ids=lambda item: item.type)
async def test_every_printed_point_of_every_sheet_is_told(client, item):
    told = strict((await client.get(f"/diodes/{one_diode.slug(item.type)}.json")).text) if item.sheets else {}
    if item.technology == "active" and "printed" not in told:
        return
    names = ("quantity", "at", "junction_c", "kind", "printed")
    found = {(*(p[name] for name in names), n) for p in told["printed"] for n in p["sheets"]}
    for number, sheet in enumerate(item.sheets, 1):
        for p in sheet.forward:
            assert ("forward", p.current_a, p.junction_c, p.kind, p.voltage_v, number) in found
        for p in sheet.reverse:
            assert ("reverse", p.reverse_v, p.junction_c, p.kind, p.current_a, number) in found


async def test_sheets_that_differ_stand_side_by_side(client):
    # 1N5819: RFE and Diodes Incorporated print at most 10 mA at 40 V, 100 °C; International Rectifier prints 6 mA.
    told = strict((await client.get("/diodes/1n5819.json")).text)
    makers = [sheet["manufacturer"] for sheet in told["sheet_ratings"]]
    hot = {
        p["printed"]: [makers[n - 1] for n in p["sheets"]]
        for p in told["printed"]
        if (p["quantity"], p["at"], p["junction_c"], p["kind"]) == ("reverse", 40, 100, "max")
    }
    assert hot == {0.01: ["RFE International", "Diodes Incorporated"], 0.006: ["International Rectifier"]}
    page = await client.get("/diodes/1n5819")
    assert page.text.count("differ</span>") >= 2


async def test_a_night_is_twelve_times_the_leakage(client):
    told = strict((await client.get("/diodes/10a10.json")).text)
    night = told["night_drain_ah_by_junction_c_and_reverse_v"]
    leak = told["leakage_a_by_junction_c_and_reverse_v"]
    assert night["x"] == [0, 10, 25, 35]
    assert night["each"] == leak["each"] == [13, 26, 52]
    at_10 = min(range(len(leak["x"])), key=lambda i: abs(leak["x"][i] - 10))
    assert leak["x"][at_10] == pytest.approx(10)
    for column, volts in zip(night["maximum"], leak["maximum"], strict=True):
        assert column[1] == pytest.approx(12 * volts[at_10])


async def test_a_voltage_above_the_rating_is_not_drawn(client):
    part = next(part for part in load_parts() if 26 <= part.vrrm_v < 52)
    told = strict((await client.get(f"/diodes/{part.key}.json")).text)
    assert told["night_drain_ah_by_junction_c_and_reverse_v"]["each"] == [13, 26]


async def test_an_active_rectifier_tells_its_supply_and_no_junction_parameters(client):
    # LM74700-Q1, Texas Instruments SNOSD17G: IQ 80 µA typical, 130 µA at most; regulated drop 20 mV.
    seen = text_of(await client.get("/diodes/lm74700-q1-irfp4310z"))
    assert "80–130 µA from the bank" in seen
    assert "Regulated forward drop 20 mV" in seen
    assert "Ideality" not in seen
    assert "Ideality" in text_of(await client.get("/diodes/10sq050"))


async def test_a_type_answers_to_its_plain_name_in_any_case(client):
    for name in ("10SQ050", "10sq050", "LM74700-Q1 + IRFP4310Z", "lm74700-q1-irfp4310z", "1N1183"):
        assert (await client.get(f"/diodes/{name}")).status_code == 200
        assert (await client.get(f"/diodes/{name}.json")).status_code == 200


@pytest.mark.parametrize("key", sorted(LEFT_OUT))
async def test_a_type_left_out_says_what_is_printed_and_why_it_is_not_computed(client, key):
    page = await client.get(f"/diodes/{key}")
    assert page.status_code == 200
    assert_whole_page(page.text)
    assert LEFT_OUT[key].reason in html.unescape(page.text)
    told = strict((await client.get(f"/diodes/{key}.json")).text)
    assert told["reason"] == LEFT_OUT[key].reason
    assert told["sheet_ratings"]


async def test_a_controller_alone_leads_to_its_pairs(client):
    page = await client.get("/diodes/ltc4359")
    assert 'href="/diodes/ltc4359-irf1010n"' in page.text


async def test_an_unknown_type_is_no_page_and_close_names_are_offered(client, assert_error_shape):
    refused = assert_error_shape(await client.get("/diodes/10SQ05O.json"), 404, "", ["10SQ050"])
    assert refused["instance"] == "/diodes/10SQ05O.json"
    page = await client.get("/diodes/10SQ05O")
    assert page.status_code == 404
    assert_whole_page(page.text)
    assert 'href="/diodes/10sq050"' in page.text


@pytest.mark.parametrize("name", ["<b>x", "%00", "ÿ" * 200, "..", "a" * 5000, "%2e%2e%2fetc", "\N{SNOWMAN}"])
async def test_names_that_are_none_are_refused_unharmed(client, name):
    page = await client.get(f"/diodes/{name}", follow_redirects=False)
    assert page.status_code in (404, 422) or name == ".."
    assert "<b>x" not in page.text


# --- words and scales -------------------------------------------------------------------------------------------------


def test_slugs_are_those_of_parts():
    assert all(one_diode.slug(part.type) == part.key for part in load_parts())
    assert not set(LEFT_OUT) & set(PARTS)


@pytest.mark.parametrize(
    ("power", "unit", "words"),
    [(-8, "A", "10 nA"), (-6, "A", "1 µA"), (-1, "A", "100 mA"), (1, "A", "10 A"), (3, "V", "1 kV")],
)
def test_decades_are_named_as_the_trade_does(power, unit, words):
    assert decade(power, unit).replace("\N{NO-BREAK SPACE}", " ") == words


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (0.0, "0 A"),
        (3e-16, "< 1 pA"),
        (3e-10, "300 pA"),
        (5e-8, "50 nA"),
        (5e-5, "50 µA"),
        (0.01, "10 mA"),
        (30, "30 A"),
    ],
)
def test_currents_are_told_in_the_unit_of_a_meter(value, words):
    assert diode_words.amps(value) == words


def test_a_log_scale_puts_equal_ratios_at_equal_distances():
    scale = LogScale.around([3e-6, 0.02, math.nan, 0.0], 0.0, 100.0, "A")
    assert (scale.low, scale.high) == (pytest.approx(1e-6), pytest.approx(0.1))
    assert [tick.at for tick in scale.ticks()] == [0.0, 20.0, 40.0, 60.0, 80.0, 100.0]
