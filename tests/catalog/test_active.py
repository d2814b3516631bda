"""Active rectifiers: pairs made of printed facts, limits the lower of both, assumptions said."""

import numpy as np
import pytest

from server.catalog.parts import load_parts, part, unfitted
from server.physics.diode import DiodeCells, forward_drop_v, reverse_a

ACTIVE = [item for item in load_parts() if item.technology == "active"]


def at_25c(law, reverse_v):
    return float(reverse_a(DiodeCells.of([law]), np.array(reverse_v), np.array(25.0))[0])


def test_three_controllers_with_two_switches_and_one_integrated_part():
    assert len(ACTIVE) == 3 * 2 + 1
    reasons = {item.type: item.reason for item in unfitted() if item.technology == "active"}
    assert "P-channel" in reasons["LTC4412"]


# The lower of: controller's reverse limit, its supply limit, drain rating. LM74700-Q1 65/65 V, LTC4359 40/80 V,
# LM74610-Q1 45 V; IRF1010N 55 V, IRFP4310Z 100 V, as printed.
@pytest.mark.parametrize(
    ("name", "limit_v"),
    [
        ("LM74700-Q1 + IRF1010N", 55),
        ("LM74700-Q1 + IRFP4310Z", 65),
        ("LTC4359 + IRFP4310Z", 40),
        ("LM74610-Q1 + IRF1010N", 45),
        ("SM74611", 30),
    ],
)
def test_the_lower_limit_of_the_pair_rules(name, limit_v):
    assert part(name).vrrm_v == limit_v


def test_printed_facts_arrive_in_the_law():
    law = part("LM74700-Q1 + IRF1010N").maximum
    assert (law.regulated_v, law.supply_a, law.turnoff_v, law.rds_on_ohm) == (0.020, 130e-6, -0.011, 0.011)
    assert part("LM74700-Q1 + IRF1010N").typical.supply_a == 80e-6
    assert part("LTC4359 + IRFP4310Z").typical.supply_a == 150e-6
    assert part("LM74610-Q1 + IRF1010N").maximum.supply_a == 0.0  # floating: nothing from the bank


def test_the_switch_leaks_what_its_sheet_allows_hot_and_cold():
    law = part("LM74700-Q1 + IRF1010N").maximum
    # IRF1010N: 25 µA at 55 V, 25 °C and 250 µA at 44 V, 150 °C.
    assert at_25c(law, 55.0) == pytest.approx(25e-6, rel=1e-3)
    hot_a = float(reverse_a(DiodeCells.of([law]), np.array(44.0), np.array(150.0))[0])
    assert hot_a == pytest.approx(250e-6, rel=0.01)


def test_the_integrated_part_drops_26_millivolt_at_8_ampere():
    drop_v = forward_drop_v(DiodeCells.of([part("SM74611").typical]), np.array(8.0), np.array(25.0))[0]
    assert drop_v == pytest.approx(0.026, abs=1e-4)  # printed mean; 0.208 W at 8 A
    assert at_25c(part("SM74611").typical, 30.0) == pytest.approx(0.3e-6, rel=1e-3)


@pytest.mark.parametrize("item", ACTIVE, ids=lambda item: item.type)
def test_every_active_part_says_what_is_from_memory(item):
    assert any("from memory" in words for words in item.assumed)
    assert item.tj_max_c == 125
