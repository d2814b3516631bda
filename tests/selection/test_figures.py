"""Figures read as a person writes them."""

import pytest

from server.selection.figures import ampere_hours, figure, milli


@pytest.mark.parametrize(
    ("value", "digits", "text"),
    [(950.4, 2, "950"), (0.0512, 2, "0.051"), (36.34, 2, "36"), (1151.9, 3, "1150"), (0.0, 2, "0"),
     (-0.00234, 2, "-0.0023"), (1.0, 2, "1"), (0.9999, 2, "1"), (2.5e-7, 2, "0.00000025"), (100.0, 2, "100")],
)  # fmt: skip
def test_a_figure_has_no_exponent(value, digits, text):
    assert figure(value, digits) == text


@pytest.mark.parametrize(
    ("amps", "text"),
    [(9.5e-4, "950 µA"), (6e-3, "6 mA"), (0.0148, "15 mA"), (1.5, "1.5 A"), (262.0, "262 A"), (3.7e-7, "0.37 µA"),
     (0.9999e-3, "1 mA"), (0.9999, "1 A")],
)  # fmt: skip
def test_a_current_is_in_the_unit_a_meter_shows(amps, text):
    assert milli(amps) == text


@pytest.mark.parametrize(
    ("charge", "text"),
    [(1.8, "1.80 Ah"), (0.18, "180 mAh"), (0.0038, "3.8 mAh"), (0.000094, "0.094 mAh"), (0.0, "0 mAh")],
)
def test_a_charge_is_in_ah_or_mah(charge, text):
    assert ampere_hours(charge) == text
