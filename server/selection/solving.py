"""The loop for every row and column of a job, summed to ledgers."""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from server.physics import climate, thermal
from server.physics.circuit import LoopInput, LoopState, solve
from server.physics.climate import SiteDays
from server.physics.diode import ActiveLaw, DiodeCells, DiodeLaw, NoDiode, PerfectValve
from server.physics.pv import StringCells, StringSpec
from server.selection.heating import HotPart
from server.selection.job import Job
from server.selection.ledger import Flows, Periods, Sums, ledgers, unlit
from server.selection.result import Audit, Candidate, DarkBand, DayTrace, Ledger, SiteFacts
from server.selection.site import Site, given

FloatArray = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class Table:
    """Columns of the loop: every part typical, then every part at maximum, then no diode and the perfect valve."""

    parts: int
    cells: DiodeCells
    rth: FloatArray
    supply_a: FloatArray

    @classmethod
    def of(cls, job: Job, hot: list[HotPart]) -> "Table":
        """Columns for the job's parts, with their thermal resistances."""
        laws: list[DiodeLaw] = [*(part.typical for part in job.parts), *(part.maximum for part in job.parts)]
        legs = [item.legs for item in hot] * 2
        rth = [item.path.rth_c_per_w for item in hot] * 2
        carried = job.array.strings if job.placement == "array" else 1
        diodes = job.array.strings // carried if carried else 1
        supply = [law.supply_a * diodes if isinstance(law, ActiveLaw) else 0.0 for law in laws]
        return cls(
            len(job.parts),
            DiodeCells.of([*laws, NoDiode(), PerfectValve()], [*legs, 1, 1], carried),
            np.array([*rth, 0.0, 0.0]),
            np.array([*supply, 0.0, 0.0]),
        )

    @property
    def none(self) -> int:
        """Column of the plain wire."""
        return 2 * self.parts

    @property
    def valve(self) -> int:
        """Column of the perfect valve."""
        return 2 * self.parts + 1


@dataclass(frozen=True, slots=True, eq=False)
class Solved:
    """Every column's ledger and dark band, the main solution, and the audit of all solutions."""

    state: LoopState
    ledgers: list[Ledger]
    bands: list[DarkBand]
    valve_wh: FloatArray
    deciding: int
    audit: Audit


def solve_all(
    job: Job, site: Site, spec: StringSpec, shunts: tuple[float, float, float], table: Table, periods: Periods
) -> Solved:
    """The loop for every row and column; again for a bank full all day; and the dark rows for each band."""
    days, bank = site.days, job.bank
    dark = unlit(days.poa_w_m2)
    bank_v = np.where(dark, bank.at_night_v, bank.by_day_v)
    box_c = _box_c(job, days)
    tracks = job.charge.controller == "mppt"
    # Behind a converter the bank's own resistance is not in the string's loop.
    shared_ohm = (job.loop_ohm + (0.0 if tracks else bank.internal_ohm)) * job.array.strings

    def loop(string: StringCells, rows: NDArray[np.intp], volts: FloatArray) -> LoopState:
        carried = float(job.array.strings if job.placement == "array" else 1)
        return solve(LoopInput(string, table.cells, volts, shared_ohm, box_c[rows], table.rth, tracks, carried))

    every = np.arange(len(bank_v))
    lit_string = spec.cells(days.poa_w_m2, days.cell_c, shunts[1])
    main = loop(lit_string, every, bank_v)
    states = [main]
    flows = Flows.of(main, job.charge, bank_v, job.array.strings)
    day, year = Sums.of(flows, periods.per_day_h), Sums.of(flows, periods.per_year_h)

    full_ah = None
    lit = np.flatnonzero(~dark)
    if not tracks and lit.size:
        volts = np.full(lit.size, bank.full_v)
        full = loop(lit_string.take(lit), lit, volts)
        states.append(full)
        full_flows = Flows.of(full, job.charge, volts, job.array.strings)
        full_ah = periods.per_day_h[:, lit] @ full_flows.charge_a

    night = np.flatnonzero(dark)
    own_h = periods.per_day_h[:, night].sum(axis=1)
    own_ah = job.charge.night_a * own_h
    own_year = job.charge.night_a * float(periods.per_year_h[night].sum())
    made = ledgers(
        day, year, full_ah, table.valve, table.supply_a, own_ah, own_year, bank.at_night_v, float(periods.days.sum())
    )
    valve_wh = np.array(made[table.valve].net_wh)
    deciding = int(np.argmin(valve_wh))

    hours = periods.per_day_h[deciding, night]
    shares = np.where(hours > 0)[0]
    night_rows = night[shares]
    weights = hours[shares]
    drains, amps = [], []
    for ohm in shunts:
        if ohm == shunts[1] or not night_rows.size or job.charge.blocks_at_night == "yes":
            taken_a = flows.drain_a[night_rows]
        else:
            cells = spec.cells(days.poa_w_m2[night_rows], days.cell_c[night_rows], ohm)
            state = loop(cells, night_rows, bank_v[night_rows])
            states.append(state)
            taken_a = Flows.of(state, job.charge, bank_v[night_rows], job.array.strings).drain_a
        drains.append(weights @ taken_a)
        total_h = float(weights.sum())
        amps.append(drains[-1] / total_h if total_h > 0 else np.zeros(len(table.rth)))
    bands = [_band(made[d], deciding, d, drains, amps, bank.at_night_v) for d in range(len(table.rth))]
    return Solved(main, made, bands, valve_wh, deciding, _audit(states))


def _box_c(job: Job, days: SiteDays) -> FloatArray:
    """Air around the diode, every row."""
    heat, dark = job.heat, unlit(days.poa_w_m2)
    if heat.box == "stated":
        night_c = days.air_c if heat.box_night_c is None else np.full_like(days.air_c, heat.box_night_c)
        return np.where(dark, night_c, given("box_day_c", heat.box_day_c))
    return thermal.box_air_c(heat.box, days.poa_w_m2, days.air_c, days.cell_c)


def _band(
    made: Ledger, period: int, column: int, drains: list[FloatArray], amps: list[FloatArray], night_v: float
) -> DarkBand:
    """Drain and net of one column for the three dark currents; the middle one is the ledger's own."""
    shift = [float(d[column] - drains[1][column]) for d in drains]
    drain = tuple(made.night_drain_ah[period] + s for s in shift)
    net_ah = tuple(made.net_ah[period] - s for s in shift)
    net_wh = tuple(made.net_wh[period] - s * night_v for s in shift)
    night = tuple(float(a[column]) for a in amps)
    return DarkBand(
        (drain[0], drain[1], drain[2]),
        (night[0], night[1], night[2]),
        (net_ah[0], net_ah[1], net_ah[2]),
        (net_wh[0], net_wh[1], net_wh[2]),
    )


def _audit(states: list[LoopState]) -> Audit:
    """Every cell solved and every watt accounted for."""
    cells = sum(state.converged.size for state in states)
    lost = sum(int(np.count_nonzero(~state.converged)) for state in states)
    worst_w, worst_frac = 0.0, 0.0
    for state in states:
        off = np.abs(state.imbalance_w)
        scale = np.maximum(state.loop.string.photo_a[:, None] * state.string_junction_v, 0.1)  # light in, or 0.1 W
        if off.size:
            worst_w = max(worst_w, float(np.nanmax(off)))
            worst_frac = max(worst_frac, float(np.nanmax(off / scale)))
    return Audit(cells, lost, worst_w, worst_frac)


def day_trace(
    site: Site, periods: Periods, facts: SiteFacts, table: Table, solved: Solved, choice: Candidate | None
) -> DayTrace:
    """The clear day of the deciding period for the choice (or for no diode)."""
    days = site.days
    column = table.none
    if choice is not None and choice.part is not None:
        index = next(i for i, made in enumerate(solved.ledgers) if made is choice.typical)
        column = index
    of_period = periods.per_day_h[facts.deciding_period] > 0
    kind = 0 if site.stated else climate.CLEAR
    rows = np.flatnonzero(of_period & (days.day_kind == kind))
    rows = rows[np.argsort(days.solar_hour[rows], kind="stable")]
    state = solved.state
    title = facts.periods[facts.deciding_period] + ("" if site.stated else ", a clear day")
    return DayTrace(
        title,
        tuple(float(x) for x in days.solar_hour[rows]),
        tuple(float(x) for x in days.poa_w_m2[rows]),
        tuple(float(x) for x in state.current_a[rows, column]),
        tuple(float(x) for x in state.junction_c[rows, column]),
    )
