"""Where leakage by night eats what a low drop saves by day."""

import numpy as np
import pytest
from worked_jobs import CLASSES, cabin, launch

from server.catalog.datasheet import ForwardPoint, ReversePoint
from server.catalog.fit import fit_points
from server.physics.diode import DiodeCells, reverse_a
from server.selection import study
from server.selection.crossover import break_even_leakage_a
from server.web.schemas import JobIn

# Arithmetic, 0.38 V of drop saved: Ah a day, mA at a 3.85 V cell (14 h), 12.7 V (13 h), 25.4 V (13 h), 51 V (12 h).
BREAK_EVEN_MA = [
    (0.01, 0.07, 0.023, 0.012, 0.006),
    (0.1, 0.7, 0.23, 0.12, 0.06),
    (1, 7, 2.3, 1.2, 0.6),
    (5, 35, 11.5, 5.8, 3.1),
    (25, 176, 57, 29, 15),
]


@pytest.mark.parametrize(("charge_ah", "cell", "v12", "v24", "v48"), BREAK_EVEN_MA)
def test_break_even_leakage(charge_ah, cell, v12, v24, v48):
    for expected, bank_v, dark_h in ((cell, 3.85, 14), (v12, 12.7, 13), (v24, 25.4, 13), (v48, 51.0, 12)):
        ours = 1e3 * break_even_leakage_a(0.38, charge_ah, bank_v, dark_h)
        assert ours == pytest.approx(expected, rel=0.05)  # the table is printed to two figures


def test_a_small_schottky_crosses_the_tenth_of_an_ah_line_hot_on_typical_cold_on_maximum_figures():
    # 3 A / 40 V axial, 0.1 mA typical and 2 mA maximum at 25 °C, 5 and 20 mA at 100 °C, at 40 V: growing exponentially
    # it crosses 0.23 mA at about +56 °C on typical and -19 °C on maximum figures. Arrhenius between the same points
    # falls faster in the cold, so the cold crossing comes some degrees warmer.
    reverse = [
        ReversePoint(40, 0.1e-3, 25, "typ"), ReversePoint(40, 5e-3, 100, "typ"),
        ReversePoint(40, 2e-3, 25, "max"), ReversePoint(40, 20e-3, 100, "max"),
    ]  # fmt: skip
    made = fit_points(
        "schottky", [ForwardPoint(1, 0.37, 25, "typ"), ForwardPoint(3, 0.475, 25, "typ")], reverse, vrrm_v=40,
        ideality=1.1, forward_slope_v_per_k=-1e-3, leakage_exponent=0.7,
    )  # fmt: skip
    temps = np.linspace(-40, 90, 1301)[:, None]
    leak = reverse_a(DiodeCells.of([made.typical, made.maximum]), np.array(12.7), temps)
    limit = break_even_leakage_a(0.38, 0.1, 12.7, 13)
    crossing = [temps[np.argmax(leak[:, c] > limit), 0] for c in range(2)]
    assert crossing[0] == pytest.approx(56, abs=6)
    assert -19 < crossing[1] < 0


def answer(values):
    return study.run(JobIn.model_validate(values).to_job())


def test_the_crossover_is_where_the_ledgers_meet():
    """Ask the whole study on both sides of the temperature it names: the order turns there."""
    leaky = {**CLASSES["S45"], "reverse": [
        {"reverse_v": 45, "current_a": 1.5e-3, "junction_c": 25, "kind": "typ"},
        {"reverse_v": 45, "current_a": 60e-3, "junction_c": 100, "kind": "typ"},
    ]}  # fmt: skip

    def at(night_c):
        return answer(launch(own_diodes=[leaky, CLASSES["PN10"]], night_air_c=night_c, box_night_c=night_c))

    named = at(22).crossover
    assert named.rival == "pn10"
    assert 30 < named.typical_c < 80
    for night_c, leads in ((named.typical_c - 3, "s45"), (named.typical_c + 3, "pn10")):
        found = at(night_c)
        nets = {key: found.candidate(key).typical.net_ah[0] for key in ("s45", "pn10")}
        assert max(nets, key=nets.get) == leads


def test_maximum_parts_cross_earlier():
    found = answer(launch()).crossover
    assert found.maximum_c is not None
    assert found.typical_c is None or found.maximum_c < found.typical_c


def test_no_part_no_crossover():
    assert answer(cabin()).crossover is None
