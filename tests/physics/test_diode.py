"""The two-way law of a diode: through zero, with heat, many legs."""

import numpy as np
import pytest

from server.errors import InputError
from server.physics import diode as dio
from server.physics.diode import ActiveLaw, DiodeCells, JunctionLaw, NoDiode

SCHOTTKY = JunctionLaw(6e-6, 1.1, 0.67, 2.0, 0.0074, 0.0, 8e-5, 45.0, 0.7, 0.6)
# A forward fit that asks for more saturation current than the part leaks.
GREEDY = JunctionLaw(1e-4, 1.1, 0.67, 2.0, 0.0074, 0.0, 8e-5, 45.0, 0.7, 0.6)
SILICON = JunctionLaw(4e-8, 1.7, 1.1, 3.0, 0.011, 0.0, 1e-7, 1000.0, 0.7, 0.5)
ACTIVE = ActiveLaw(0.02, 0.005, 0.004, 2e-6, 65.0, 1.0, 0.6, 8e-5, -0.011)
LAWS = [SCHOTTKY, GREEDY, SILICON, ACTIVE]


@pytest.mark.parametrize("junction_c", [-40.0, 25.0, 100.0, 150.0])
def test_current_rises_through_zero_without_a_step(junction_c):
    v = np.r_[-np.geomspace(40, 1e-9, 4000), 0.0, np.geomspace(1e-9, 0.3, 4000)][:, None]
    current = dio.current_a(DiodeCells.of(LAWS), v, np.array(junction_c))
    step = np.diff(current, axis=0)
    assert np.all(step >= 0)
    assert np.all(step[np.abs(v[1:, 0]) > 1e-6] > 0)  # below a microvolt rounding makes steps of its own
    assert np.all(current[4000] == 0)


@pytest.mark.parametrize("law", [SCHOTTKY, GREEDY, SILICON], ids=["schottky", "greedy", "silicon"])
@pytest.mark.parametrize("junction_c", [25.0, 100.0])
def test_both_branches_leave_zero_with_one_slope(law, junction_c):
    h = 1e-9
    up, down = dio.current_a(DiodeCells.of([law]), np.array([[h], [-h]]), np.array(junction_c))[:, 0]
    assert up / h == pytest.approx(-down / h, rel=1e-4)


def test_leakage_is_the_stated_one_at_its_stated_point():
    for junction_c, expected in ((25.0, 8e-5), (100.0, 8e-5 * dio.arrhenius_ratio(100.0, 0.6))):
        assert dio.reverse_a(DiodeCells.of([SCHOTTKY]), np.array(45.0), np.array(junction_c))[0] == pytest.approx(
            expected
        )


def test_forward_drop_inverts_the_current_law():
    cells = DiodeCells.of([SCHOTTKY, SILICON, ACTIVE])
    current = np.geomspace(1e-6, 30, 60)[:, None]
    drop = dio.forward_drop_v(cells, current, np.array(60.0))
    junction = drop - np.where(cells.active, 0.0, current * dio.series_ohm(cells, np.array(60.0)))
    assert dio.current_a(cells, junction, np.array(60.0)) == pytest.approx(np.broadcast_to(current, (60, 3)), rel=1e-9)


def test_two_legs_leak_twice_and_drop_as_at_half_the_current():
    one, two = DiodeCells.of([SCHOTTKY]), DiodeCells.of([SCHOTTKY], [2])
    at = np.array(25.0)
    assert dio.reverse_a(two, np.array(13.0), at) == pytest.approx(2 * dio.reverse_a(one, np.array(13.0), at))
    assert dio.forward_drop_v(two, np.array(8.0), at) == pytest.approx(dio.forward_drop_v(one, np.array(4.0), at))


def test_an_active_rectifier_is_held_then_resistive():
    drop = dio.forward_drop_v(DiodeCells.of([ACTIVE]), np.array([1.0, 10.0]), np.array(25.0))
    assert drop == pytest.approx([0.02, 0.05], rel=2e-3)  # 20 mV regulated; 5 mohm × 10 A


def test_a_plain_wire_drops_nothing():
    assert dio.forward_drop_v(DiodeCells.of([NoDiode()]), np.array(10.0), np.array(25.0))[0] == 0.0


def test_a_shifted_part_drops_by_the_shift_and_leaks_by_the_factor():
    shifted = dio.scaled(SCHOTTKY, leakage=3.0, drop_v=0.05)
    at, i = np.array(25.0), np.array(2.0)
    before, after = (dio.forward_drop_v(DiodeCells.of([law]), i, at)[0] for law in (SCHOTTKY, shifted))
    assert after - before == pytest.approx(0.05, abs=1e-6)
    leak = [dio.reverse_a(DiodeCells.of([law]), np.array(45.0), at)[0] for law in (SCHOTTKY, shifted)]
    assert leak[1] / leak[0] == pytest.approx(3.0)


@pytest.mark.parametrize(("field", "value"), [("ideality", 0.0), ("leakage_a", -1e-6), ("series_ohm", -0.1)])
def test_what_is_no_diode_is_refused(field, value):
    values = {name: getattr(SCHOTTKY, name) for name in SCHOTTKY.__slots__}
    with pytest.raises(InputError) as caught:
        JunctionLaw(**{**values, field: value})
    assert caught.value.field == field
