"""Speed and memory as ratios within one run:  python tests/benchmarks/run.py

Absolute times say more about a machine than about the code. Each pair is timed in turn, many times over, and medians
are compared, so that a busy moment of the machine falls on both.
"""

import asyncio
import sys
import time
import tracemalloc
import warnings
from collections.abc import Callable
from pathlib import Path
from statistics import median

import numpy as np
from scipy.optimize import elementwise

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT))

from server.catalog.parts import load_parts  # noqa: E402
from server.physics import circuit  # noqa: E402
from server.physics import diode as dio  # noqa: E402
from server.physics.circuit import LoopInput, LoopState, solve  # noqa: E402
from server.physics.diode import DiodeCells, JunctionLaw  # noqa: E402
from server.physics.pv import ModuleLabel, SingleDiode, StringCells, StringSpec, fit_label  # noqa: E402
from server.selection import solving  # noqa: E402

MODULE = SingleDiode(5.91, 3.07e-11, 0.8476, 0.2185, 137.3, 0.003)
BOX_C, OHM = 40.0, 0.055


def seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def field(rows: int, columns: int) -> tuple[StringCells, DiodeCells]:
    """Random light and temperature against random Schottky and silicon diodes; seeded."""
    rng = np.random.default_rng(1)
    string = StringSpec(MODULE, 36, 5.9).cells(rng.uniform(5, 1100, rows), rng.uniform(0, 65, rows), 1159.0)
    laws = [
        JunctionLaw(
            10 ** rng.uniform(-9, -5),
            rng.uniform(1.03, 1.9),
            0.67,
            2.0,
            rng.uniform(0.003, 0.02),
            0,
            8e-5,
            45,
            0.7,
            0.6,
        )
        for _ in range(columns)
    ]
    return string, DiodeCells.of(laws)


def our_loop(string: StringCells, diodes: DiodeCells, bank_v: float) -> LoopState:
    return solve(LoopInput(string, diodes, bank_v, OHM, BOX_C, 0.0))


def oracle_loop(string: StringCells, diodes: DiodeCells, bank_v: float) -> np.ndarray:
    """The same cells by scipy's bracketing root finder, in the unknown that suits it best: the diode's own voltage.

    Only rows where the string charges at all; both sides are timed on those.
    """
    column = string.column()
    shape = (len(string), len(diodes))
    n_vt = np.broadcast_to(diodes.ideality * dio.thermal_voltage_v(BOX_C), shape)
    is_a = np.broadcast_to(dio.saturation_a(diodes, np.array(BOX_C)), shape)
    ohm = np.broadcast_to(OHM + dio.series_ohm(diodes, np.array(BOX_C)) + column.series_ohm, shape)
    photo, sat, slope, shunt = (
        np.broadcast_to(getattr(column, name), shape) for name in ("photo_a", "saturation_a", "slope_v", "shunt_s")
    )

    def imbalance(v, n_vt, is_a, ohm, photo, sat, slope, shunt):
        i = is_a * np.expm1(v / n_vt)
        y = bank_v + v + i * ohm
        return photo - sat * np.expm1(np.minimum(y / slope, 600)) - y * shunt - i

    top = np.minimum(n_vt * np.log1p(photo / is_a), (string.open_circuit_v() - bank_v)[:, None])
    found = elementwise.find_root(
        imbalance,
        (np.zeros(shape), top),
        args=(n_vt, is_a, ohm, photo, sat, slope, shunt),
        tolerances={"xatol": 1e-12},
    )
    return is_a * np.expm1(found.x / n_vt)


def bare(cells: np.ndarray) -> None:
    """Two exponentials and a logarithm over as many cells."""
    np.exp(cells)
    np.exp(-cells)
    np.log(cells)


def compare_loop() -> None:
    string, diodes = field(3750, 80)
    cells = np.random.default_rng(2).uniform(0.1, 20, (3750, 80))
    print("loop of 300 000 cells, no self-heating; medians")
    for bank_v in (12.0, 13.0, 14.4):
        ours, floor, oracle = [], [], []
        for turn in range(15):
            ours.append(seconds(lambda v=bank_v: our_loop(string, diodes, v)))
            floor.append(seconds(lambda: bare(cells)))
            if turn < 3:
                up = string.take(np.flatnonzero(string.current_a(np.full(len(string), bank_v)) > 0))
                oracle.append(seconds(lambda v=bank_v, s=up: oracle_loop(s, diodes, v)) * len(string) / len(up))
        up = string.take(np.flatnonzero(string.current_a(np.full(len(string), bank_v)) > 0))
        gap = np.abs(our_loop(up, diodes, bank_v).current_a - oracle_loop(up, diodes, bank_v)).max()
        print(
            f"  bank {bank_v:4.1f} V: {1e3 * median(ours):6.1f} ms;"
            f"  {median(oracle) / median(ours):6.1f} x faster than find_root, worst difference {gap:.1e} A;"
            f"  {median(ours) / median(floor):5.1f} x two exp and one log ({1e3 * median(floor):.2f} ms)"
        )


def compare_job() -> None:
    """The demo job with the whole catalogue: over HTTP, in process, against the loop solves within it."""
    import httpx

    from server.web.app import create_app
    from server.web.form import DEMO

    spent = [0.0]
    plain = circuit.solve

    def timed(loop: LoopInput) -> LoopState:
        start = time.perf_counter()
        try:
            return plain(loop)
        finally:
            spent[0] += time.perf_counter() - start

    body = DEMO.model_dump(mode="json", exclude_none=True, exclude={"candidates"})

    async def ask() -> tuple[float, float]:
        transport = httpx.ASGITransport(app=create_app())
        async with httpx.AsyncClient(transport=transport, base_url="http://localhost", timeout=120) as client:
            whole, solves = [], []
            for turn in range(6):
                spent[0] = 0.0
                start = time.perf_counter()
                answer = await client.post("/api/v1/job", json=body | {"terminals_ohm": 1e-4 * turn})  # none kept
                whole.append(time.perf_counter() - start)
                solves.append(spent[0])
                assert answer.status_code == 200, answer.text
            return median(whole[1:]), median(solves[1:])

    solving.solve = timed
    try:
        whole, solves = asyncio.run(ask())
    finally:
        solving.solve = plain
    print(
        f"demo job, {len(load_parts())} types, both corners, over HTTP: {1e3 * whole:.0f} ms = {whole / solves:.2f} x"
        f" its bare solves ({1e3 * solves:.0f} ms)"
    )


def year_of_hours(columns: int, hours: int = 8760) -> LoopState:
    light = np.clip(np.sin(np.arange(hours) / 24 * 2 * np.pi - np.pi / 2), 0, None) * 900
    spec = StringSpec(fit_label(ModuleLabel(22.0, 5.9, 18.2, 5.5, 36)).module, 36, 5.9)
    string = spec.cells(light, 15 + light / 40, 1159.0)
    parts = [part for part in load_parts() if part.technology != "active"][: columns // 2]
    diodes = DiodeCells.of([law for part in parts for law in (part.typical, part.maximum)])
    return solve(LoopInput(string, diodes, 13.0, OHM, 20 + light / 50, 5.0))


def memory_and_growth() -> None:
    year_of_hours(10)
    tracemalloc.start()
    year_of_hours(80)
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    print(f"a year of hours x 40 types x 2 corners, self-heating: peak {peak / 1e6:.0f} MB")
    hours = [median(seconds(lambda h=h: year_of_hours(40, h)) for _ in range(3)) for h in (4380, 8760, 17520)]
    types = [median(seconds(lambda c=c: year_of_hours(c)) for _ in range(3)) for c in (20, 40, 80)]
    print(f"  hours doubled twice: x {hours[1] / hours[0]:.2f}, x {hours[2] / hours[1]:.2f}")
    print(f"  types doubled twice: x {types[1] / types[0]:.2f}, x {types[2] / types[1]:.2f}")


if __name__ == "__main__":
    warnings.simplefilter("ignore")
    compare_loop()
    memory_and_growth()
    compare_job()
