"""A few readings move a catalogue part through them and leave the rest of it alone."""

import numpy as np
import pytest

from server.catalog.in_hand import ForwardReading, ReverseReading, refit, through_voltmeter
from server.catalog.parts import part
from server.errors import InputError
from server.physics.diode import DiodeCells, forward_drop_v, reverse_a

MBR = part("MBR1045")


def drop(law, amps, c):
    return forward_drop_v(DiodeCells.of([law]), np.array([amps]), np.array([c]))[0]


def leak(law, volts, c):
    return reverse_a(DiodeCells.of([law]), np.array([volts]), np.array([c]))[0]


def test_two_drops_and_two_leakages_are_met():
    made = refit(
        MBR,
        [ForwardReading(1.0, 0.40, 30), ForwardReading(5.0, 0.50, 35)],
        [ReverseReading(12.7, 20e-6, 20), ReverseReading(12.7, 150e-6, 50)],
    )
    assert drop(made.typical, 1.0, 30) == pytest.approx(0.40, abs=5e-3)
    assert drop(made.typical, 5.0, 35) == pytest.approx(0.50, abs=5e-3)
    assert leak(made.typical, 12.7, 20) == pytest.approx(20e-6, rel=0.03)
    assert leak(made.typical, 12.7, 50) == pytest.approx(150e-6, rel=0.03)


def test_the_band_shrinks_to_what_the_meter_leaves_open():
    made = refit(MBR, [ForwardReading(3.0, 0.45, 25)], [ReverseReading(12.7, 30e-6, 20)])
    assert leak(made.maximum, 12.7, 20) / leak(made.typical, 12.7, 20) == pytest.approx(1.25, rel=0.03)
    assert drop(made.maximum, 3.0, 25) - drop(made.typical, 3.0, 25) == pytest.approx(0.01, abs=1e-3)
    before = leak(MBR.maximum, 12.7, 20) / leak(MBR.typical, 12.7, 20)
    assert before > 1.25


def test_what_was_not_measured_keeps_the_sheets_corners():
    made = refit(MBR, [], [ReverseReading(12.7, 30e-6, 20)])
    assert drop(made.typical, 5.0, 25) == pytest.approx(drop(MBR.typical, 5.0, 25), abs=1e-3)
    only_drop = refit(MBR, [ForwardReading(3.0, 0.45, 25)], [])
    assert leak(only_drop.maximum, 12.7, 40) == pytest.approx(leak(MBR.maximum, 12.7, 40), rel=0.03)


def test_a_voltmeter_in_series_is_a_shunt():
    # 10 Mohm showing 5.0 V of a 12.7 V bank: 0.5 uA, and 7.7 V on the diode.
    reading = through_voltmeter(12.7, 5.0, 10e6, 20.0)
    assert reading.current_a == pytest.approx(0.5e-6)
    assert reading.reverse_v == pytest.approx(7.7)


@pytest.mark.parametrize(
    ("field", "call"),
    [
        ("forward", lambda: refit(MBR, [ForwardReading(5.0, 1.2, 25)], [])),
        ("forward", lambda: refit(MBR, [ForwardReading(-1.0, 0.4, 25)], [])),
        ("forward", lambda: refit(MBR, [ForwardReading(1.0, 0.4, 300)], [])),
        ("reverse", lambda: refit(MBR, [], [ReverseReading(12.7, 5.0, 20)])),
        ("reverse", lambda: refit(MBR, [], [ReverseReading(12.7, -1e-6, 20)])),
        ("forward", lambda: refit(MBR, [], [])),
        ("forward", lambda: refit(MBR, [ForwardReading(1.0, 0.4, 25)] * 9, [])),
        ("type", lambda: refit(part("SM74611"), [ForwardReading(1.0, 0.02, 25)], [])),
        ("meter_v", lambda: through_voltmeter(12.7, 13.0, 1e7, 20)),
    ],
)
def test_a_reading_that_cannot_be_is_a_sentence(field, call):
    with pytest.raises(InputError) as caught:
        call()
    assert caught.value.field == field
    assert len(caught.value.sentence.split()) > 4
