"""Cable and battery against figures in print."""

import pytest

from server.errors import InputError
from server.physics.battery import CHEMISTRIES, Bank, compensated_v
from server.physics.wire import awg_area_mm2, awg_ohm_per_km, loop_ohm, wire_ohm

# READ: NEC 2017 Chapter 9 Table 8, uncoated copper at 75 °C: gauge, ohm per km, ohm per thousand feet (stranded).
TABLE_8 = [("14", 10.3, 3.14), ("12", 6.50, 1.98), ("10", 4.070, 1.24), ("8", 2.551, 0.778), ("4", 1.010, 0.308)]


@pytest.mark.parametrize(("gauge", "per_km", "per_kft"), TABLE_8)
def test_stranded_copper_by_gauge(gauge, per_km, per_kft):
    assert awg_ohm_per_km(gauge) == pytest.approx(per_km, rel=0.005)
    assert awg_ohm_per_km(gauge) * 0.3048 == pytest.approx(per_kft, rel=0.005)


def test_solid_copper_by_cross_section():
    # READ: the same table, solid: 10 AWG 3.984, 14 AWG 10.1, 12 AWG 6.34, 8 AWG 2.506 ohm/km at 75 °C.
    for gauge, per_km in (("10", 3.984), ("14", 10.1), ("12", 6.34), ("8", 2.506)):
        assert wire_ohm(1000, awg_area_mm2(gauge), 75) == pytest.approx(per_km, rel=0.005)


def test_copper_with_temperature():
    # READ-IN: 10 AWG stranded at 50 °C: 4.070 × [1 + 0.00323 × (50 − 75)] = 3.741 ohm/km.
    assert awg_ohm_per_km("10", 50) == pytest.approx(3.741, rel=1e-3)


def test_two_way_drop():
    # READ-IN: 10 AWG stranded, 75 °C, 10 A, 10 m one way: 0.814 V.
    assert 10 * loop_ohm(10, 75, awg="10") == pytest.approx(0.814, rel=1e-9)


# Largest resistance allowed for copper conductors at 20 °C, IEC 60228, ohm per km: class 2 and class 5. 25 mm2 class 2
# READ (a public building-model library); the others MEM.
IEC_60228 = [(4.0, 4.61, 4.95), (6.0, 3.08, 3.30), (10.0, 1.83, 1.91), (16.0, 1.15, 1.21), (25.0, 0.727, 0.780)]


@pytest.mark.parametrize(("area_mm2", "class_2", "class_5"), IEC_60228)
def test_ideal_copper_sits_just_inside_the_iec_limits(area_mm2, class_2, class_5):
    ours = wire_ohm(1000, area_mm2, 20)
    assert 0.92 * class_2 < ours < class_2  # the limits stand 5 to 8 % above ideal copper
    assert 0.85 * class_5 < ours < class_5


def test_ideal_copper_of_4_mm2():
    # READ-IN: 0.017241 ohm mm2/m -> 4.310 ohm/km.
    assert wire_ohm(1000, 4, 20) == pytest.approx(4.310, rel=1e-4)


@pytest.mark.parametrize(
    ("field", "call"),
    [
        ("cable_awg", {"awg": "7/0"}),
        ("cable_awg", {"awg": "six"}),
        ("cable_awg", {"awg": "10", "area_mm2": 4.0}),
        ("cable_mm2", {"area_mm2": 0.0}),
        ("cable_mm2", {}),
        ("conductor", {"area_mm2": 4.0, "conductor": "iron"}),
    ],
)
def test_no_cable_is_a_sentence(field, call):
    with pytest.raises(InputError) as caught:
        loop_ohm(5, 20, **call)
    assert caught.value.field == field


@pytest.mark.parametrize(("battery_c", "cell_v", "six_v"), [(25, 2.30, 13.80), (35, 2.27, 13.62), (15, 2.33, 13.98)])
def test_float_voltage_shifts_with_temperature(battery_c, cell_v, six_v):
    # READ: battery-university text, mirrored: 2.30 V a cell at 25 °C, -3 mV/K.
    ours = compensated_v(2.30, CHEMISTRIES["flooded"].v_per_c, battery_c)
    assert ours == pytest.approx(cell_v)
    assert 6 * ours == pytest.approx(six_v)


# Common practice: night rest, absorption and highest stage of a 12 V bank, as ranges of the trade.
RANGES = [
    ("flooded", 12, (12.2, 12.8), (14.4, 14.8), (15.0, 16.0)),
    ("agm", 12, (12.4, 13.0), (14.4, 14.7), (14.4, 14.8)),
    ("gel", 12, (12.4, 12.9), (14.1, 14.4), (14.1, 14.5)),
    ("lifepo4", 12, (13.1, 13.4), (14.2, 14.6), (14.2, 14.7)),
    ("nicd", 12, (12.5, 13.2), (14.5, 15.5), (14.5, 16.5)),
    ("nimh", 12, (12.5, 13.2), (14.0, 14.5), (14.0, 14.5)),
    ("li_ion", 3.7, (3.6, 4.1), (4.15, 4.2), (4.15, 4.2)),
    ("li_ion", 24, (25, 29), (29.3, 29.5), (29.3, 29.5)),
    ("li_ion", 48, (47, 54), (54.5, 54.7), (54.5, 54.7)),
    ("lifepo4", 48, (52.4, 53.6), (56.8, 58.4), (56.8, 58.8)),
]


@pytest.mark.parametrize(("chemistry", "nominal", "rest", "full", "top"), RANGES)
def test_stage_voltages_lie_in_the_trades_ranges(chemistry, nominal, rest, full, top):
    bank = Bank(chemistry, nominal)
    assert rest[0] - 1e-9 <= bank.at_night_v <= rest[1] + 1e-9
    assert full[0] - 1e-9 <= bank.full_v <= full[1] + 1e-9
    assert top[0] - 1e-9 <= bank.top_v(25.0) <= top[1] + 1e-9
    assert bank.at_night_v < bank.by_day_v < bank.full_v <= bank.top_v(25.0)


def test_the_highest_stage_rises_in_the_cold_but_a_stated_one_stands():
    assert Bank("flooded", 12).top_v(-5.0) == pytest.approx(15.5 + 6 * 0.003 * 30)
    assert Bank("flooded", 12, highest_v=15.5).top_v(-5.0) == 15.5


@pytest.mark.parametrize(
    ("field", "make"),
    [
        ("battery_nominal_v", lambda: Bank("agm", -12)),
        ("battery_ah", lambda: Bank("agm", 12, 0.0)),
        ("battery_night_v", lambda: Bank("agm", 12, None, 50.0)),
        ("chemistry", lambda: Bank("lemon", 12)),
    ],
)
def test_no_bank_is_a_sentence(field, make):
    with pytest.raises(InputError) as caught:
        make()
    assert caught.value.field == field
