"""run(job) -> Study, the one door: days, loop, ledgers, ratings, order, words."""

import math
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from server.catalog.part import Part
from server.errors import InputError
from server.physics import climate, pv, thermal
from server.physics.circuit import LoopInput, LoopState, solve
from server.physics.climate import SiteDays
from server.physics.diode import ActiveLaw, DiodeCells, DiodeLaw, NoDiode, PerfectValve, reverse_a
from server.physics.pv import SingleDiode, StringCells, StringSpec
from server.selection import cautions as safety
from server.selection import ratings
from server.selection.crossover import crossover
from server.selection.faults import fault_study
from server.selection.field_test import field_test
from server.selection.figures import milli
from server.selection.heating import HotPart, Path, Worst, hot_parts
from server.selection.job import Job
from server.selection.ledger import Flows, Periods, Sums, ledgers, unlit
from server.selection.ranking import NONE_KEY, RESOLUTION_FRAC, VALVE_KEY, Entry, order, verdict
from server.selection.result import (
    Assumption,
    Audit,
    Candidate,
    Check,
    DarkBand,
    DayTrace,
    Ledger,
    Note,
    SecondSource,
    SiteFacts,
    Standing,
    Study,
)

FloatArray = NDArray[np.float64]

ENGINE_VERSION = "0.1.0"
STEP_MINUTES = 15
# A string's hot cell: full sun on the hottest day.
FULL_SUN_W_M2 = 1000.0
COLD_SKY_C = 2.0  # a module's dawn temperature below an estimated record low
ENGINE_ROOM_HOTTEST_C = 60.0
DARK = ("low", "middle", "high")


@dataclass(frozen=True, slots=True, eq=False)
class Site:
    """The job's climate as days, and what the days do not hold."""

    days: SiteDays
    plane: climate.Plane
    altitude_m: float
    stated: bool


def run(job: Job) -> Study:
    """Judge every candidate of `job` and answer.

    Raises:  InputError where the job cannot be computed; a part that fails a check is a result, not an error.
    """
    site = site_days(job)
    string = string_spec(job)
    shunts = dark_shunts(job, string.spec)
    worst = worst_case(job, site)
    hot = hot_parts(job, worst, ratings.current_factor(job.rule))
    table = _Table.of(job, hot)
    periods = Periods.of(site.days, site.stated)
    solved = _solve_all(job, site, string.spec, shunts, table, periods)
    facts = _facts(job, site, string, shunts, worst, periods, solved)
    candidates = _candidates(job, worst, hot, table, solved)
    resolution_wh = resolution(solved.ledgers[table.valve], facts)
    candidates = _ranked(job, candidates, facts.deciding_period, resolution_wh)
    rule_winner = _under_double_rule(job, worst, candidates, facts, resolution_wh)
    answer = verdict(job, facts, candidates, resolution_wh, rule_winner)
    choice = next((item for item in candidates if item.key == answer.choice), None)
    none = next(item for item in candidates if item.key == NONE_KEY)
    site_wide = ratings.site_checks(job)
    assumptions = tuple(Assumption(*row) for row in job.assumptions) + _site_assumptions(job, site)
    if choice is not None and choice.part is not None:
        assumptions += tuple(Assumption("candidates", choice.title, text) for text in choice.part.assumed)
    return Study(
        ENGINE_VERSION,
        answer,
        facts,
        tuple(candidates),
        site_wide,
        safety.cautions(safety.Situation(job, facts, choice, site_wide)),
        _notes(job, site, string, choice, candidates),
        assumptions,
        solved.audit,
        fault_study(job, string.spec, shunts[1], worst.box_c, choice, none),
        None if answer.choice is None or choice is None else field_test(job, facts, choice, none),
        _second_source(job, string.spec, shunts[1], facts, worst, choice),
        None if choice is None else crossover(job, string.spec, shunts[1], facts, choice, candidates),
        _trace(site, periods, facts, table, solved, choice),
    )


# --- the site ---------------------------------------------------------------------------------------------------------


def site_days(job: Job) -> Site:
    """The days that stand for the year, from the climate the job chose."""
    c = job.climate
    if c.source == "stated_day":
        stated_plane = _plane(job, 0.0)
        days = climate.stated_day(
            _given("peak_sun_h", c.peak_sun_h),
            _given("daylight_h", c.daylight_h),
            _given("day_air_c", c.day_air_c),
            _given("night_air_c", c.night_air_c),
            stated_plane,
            STEP_MINUTES,
            record_low_c=c.record_low_c,
            record_high_c=c.record_high_c,
        )
        return Site(days, stated_plane, c.altitude_m or 0.0, True)
    if c.source == "preset":
        place = climate.preset(c.preset or "").site
        place = climate.Site(
            place.lat_deg, place.lon_deg, c.altitude_m if c.altitude_m is not None else place.altitude_m
        )
        monthly = climate.monthly_from_preset(c.preset or "")
    else:
        place = climate.Site(_given("lat_deg", c.lat_deg), _given("lon_deg", c.lon_deg), c.altitude_m)
        if c.source == "grid":
            monthly = climate.monthly_from_grid(place)
        elif c.kt_monthly is not None:
            monthly = climate.monthly_from_kt(c.kt_monthly, c.air_min_c_monthly or (), c.air_max_c_monthly or ())
        else:
            monthly = climate.monthly_from_h(
                place, c.h_kwh_m2_monthly or (), c.air_min_c_monthly or (), c.air_max_c_monthly or ()
            )
    if c.record_low_c is not None:
        monthly = replace(monthly, record_low_c=c.record_low_c, record_low_assumed=False)
    if c.record_high_c is not None:
        monthly = replace(monthly, record_high_c=c.record_high_c, record_high_assumed=False)
    plane = _plane(job, place.lat_deg)
    year = climate.three_day_year(place, monthly, plane, STEP_MINUTES, c.dark_days_per_month)
    return Site(year, plane, place.height_m, False)


def _given(name: str, value: float | None) -> float:
    if value is None:
        raise InputError(name, "it is missing")
    return value


def _plane(job: Job, lat_deg: float) -> climate.Plane:
    chosen, usual = job.plane, climate.default_plane(lat_deg, job.plane.mounting)
    return climate.Plane(
        usual.tilt_deg if chosen.tilt_deg is None else chosen.tilt_deg,
        usual.azimuth_deg if chosen.azimuth_deg is None else chosen.azimuth_deg,
        chosen.albedo_frac,
        chosen.mounting,
        chosen.wind_m_s,
    )


# --- the string -------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class _String:
    spec: StringSpec
    fit: pv.LabelFit | None
    reading_ok: bool = True


def string_spec(job: Job) -> _String:
    """The string's parameters, fitted to the label unless they are stated."""
    array, label = job.array, job.array.label
    fitted = None if array.single_diode is not None else pv.fit_label(label)
    module: SingleDiode = array.single_diode if array.single_diode is not None else fitted.module  # type: ignore[union-attr]
    spec = StringSpec(
        module, label.series_cells, label.isc_a, array.modules_in_series, array.soiling_frac, array.mismatch_frac
    )
    return _String(spec, fitted)


def dark_shunts(job: Job, spec: StringSpec) -> tuple[float, float, float]:
    """Dark shunt of one module for a low, middle and high dark current, ohm; all three the same after a night reading.

    The job's own choice of band stands in the middle.
    """
    reading = job.array.night_reading
    if reading is not None:
        ohm, _ = spec.dark_shunt_from_reading_ohm(reading.reading_a, reading.terminal_v, reading.cell_c)
        return ohm, ohm, ohm
    low, middle, high = (spec.dark_shunt_ohm(band) for band in DARK)  # type: ignore[arg-type]
    return low, {"low": low, "middle": middle, "high": high}[job.array.dark_current], high


# --- the worst case ---------------------------------------------------------------------------------------------------


def cold_voc(job: Job, days: SiteDays) -> tuple[float, str]:
    """Open-circuit voltage of the coldest string, and how it was worked out."""
    label, n = job.array.label, job.array.modules_in_series
    coldest = days.record_low_c - (COLD_SKY_C if days.record_low_assumed else 0.0)
    by_table = ratings.PROFILES[job.rule.profile].by_table
    if by_table and label.voc_pct_per_c is None and label.cell_type in ("mono", "poly"):
        factor = ratings.table_factor(days.record_low_c)
        return n * label.voc_v * factor, f"{factor:g} × Voc, table for crystalline silicon at {days.record_low_c:g} °C"
    return n * label.voc_at_v(coldest), f"{label.voc_coefficient_pct_per_c:g} %/°C at {coldest:.0f} °C"


def hottest_box_c(job: Job, site: Site) -> float:
    """Air around the diode on the hottest day in full sun."""
    heat, high = job.heat, site.days.record_high_c
    if heat.box == "stated":
        return _given("box_day_c", heat.box_day_c)
    if heat.box == "engine_room":
        return max(ENGINE_ROOM_HOTTEST_C, high)
    light, air = np.array([FULL_SUN_W_M2]), np.array([high])
    return float(thermal.box_air_c(heat.box, light, air, site.plane.cell_c(light, air))[0])


def worst_case(job: Job, site: Site) -> Worst:
    """What every candidate's ratings are held against."""
    array, bank, days = job.array, job.bank, site.days
    label, n = array.label, array.modules_in_series
    cold_v, _ = cold_voc(job, days)
    carried = array.strings if job.placement == "array" else 1
    # Strings beside a dead one, or a converter's input, can stand at open circuit; behind ONE diode all strings are on
    # its anode's side, and only the bank can reverse it.
    many = array.strings > carried or job.charge.controller == "mppt"
    other_v = job.other_source_v or 0.0
    top_v = max(bank.top_v(days.record_low_c), other_v)
    hot_cell = float(site.plane.cell_c(np.array([FULL_SUN_W_M2]), np.array([days.record_high_c]))[0])
    vmp_slope = (
        label.voc_coefficient_pct_per_c / 100.0 * label.voc_v
    )  # volts per °C, about that of Voc (common practice)
    return Worst(
        stress_v=max(top_v, cold_v) if many else top_v,
        cold_voc_v=cold_v,
        hot_reverse_v=max(bank.top_v(25.0), other_v, n * label.voc_at_v(hot_cell) if many else 0.0),
        isc_a=label.isc_a * carried,
        box_c=hottest_box_c(job, site),
        hot_vmp_v=n * (label.vmp_v + vmp_slope * (hot_cell - 25.0)),
        full_v=bank.full_v,
        loop_ohm=job.loop_ohm * array.strings / carried,
        altitude=thermal.altitude_factor(site.altitude_m),
        strings_per_diode=carried,
    )


# --- the loop ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class _Table:
    """Columns of the loop: every part typical, then every part at maximum, then no diode and the perfect valve."""

    parts: int
    cells: DiodeCells
    rth: FloatArray
    supply_a: FloatArray

    @classmethod
    def of(cls, job: Job, hot: list[HotPart]) -> "_Table":
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
        return 2 * self.parts

    @property
    def valve(self) -> int:
        return 2 * self.parts + 1


@dataclass(frozen=True, slots=True, eq=False)
class _Solved:
    state: LoopState
    ledgers: list[Ledger]
    bands: list[DarkBand]
    valve_wh: FloatArray
    deciding: int
    audit: Audit


def _solve_all(
    job: Job, site: Site, spec: StringSpec, shunts: tuple[float, float, float], table: _Table, periods: Periods
) -> _Solved:
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
    return _Solved(main, made, bands, valve_wh, deciding, _audit(states))


def _box_c(job: Job, days: SiteDays) -> FloatArray:
    """Air around the diode, every row."""
    heat, dark = job.heat, unlit(days.poa_w_m2)
    if heat.box == "stated":
        night_c = days.air_c if heat.box_night_c is None else np.full_like(days.air_c, heat.box_night_c)
        return np.where(dark, night_c, _given("box_day_c", heat.box_day_c))
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


# --- the candidates ---------------------------------------------------------------------------------------------------


def _candidates(job: Job, worst: Worst, hot: list[HotPart], table: "_Table", solved: "_Solved") -> list[Candidate]:
    """Every part, then no diode, then the perfect valve, judged but not yet in order."""
    out = []
    sharing = job.array.strings if job.heat.one_sink and job.placement == "per_string" else 1
    for index, part in enumerate(job.parts):
        checks = ratings.part_checks(part, job, worst, hot[index])
        path = hot[index].path
        standing, reasons = _standing(checks)
        if standing != "fail" and ratings.is_active(part) and job.charge.controller == "shunt":
            standing = "confirm"
            reasons = ("its maker must confirm it with a regulator that shorts the panel", *reasons)
        maximum = index + table.parts
        out.append(
            Candidate(
                part.key,
                part.type,
                part.technology,
                part,
                standing,
                None,
                solved.ledgers[index],
                solved.ledgers[maximum],
                solved.bands[index],
                solved.bands[maximum],
                checks,
                hot[index].junction_c,
                path.power_w,
                path.rth_c_per_w,
                path.origin,
                path.sink_needed_c_per_w,
                _sink_to_buy(path, sharing),
                hot[index].in_reverse(),
                False,
                reasons,
            )
        )
    bare_a = solved.bands[table.none].night_a[2] / job.array.strings
    checks = ratings.none_checks(job, worst, bare_a)
    standing, reasons = _standing(checks)
    out.append(_reference(NONE_KEY, "No diode", "none", standing, reasons, checks, table.none, solved))
    out.append(_reference(VALVE_KEY, "Perfect valve", "reference", "reference", (), (), table.valve, solved))
    return out


def _reference(
    key: str,
    title: str,
    technology: str,
    standing: Standing,
    reasons: tuple[str, ...],
    checks: tuple[Check, ...],
    column: int,
    solved: _Solved,
) -> Candidate:
    made, band = solved.ledgers[column], solved.bands[column]
    return Candidate(
        key,
        title,
        technology,
        None,
        standing,
        None,
        made,
        made,
        band,
        band,
        checks,
        None,
        None,
        None,
        "",
        None,
        None,
        None,
        False,
        reasons,
    )


def _sink_to_buy(path: Path, sharing: int) -> float | None:
    """The needed sink's figure as catalogues quote it, at 75 °C of rise; None where no sink helps or none is asked."""
    needed = path.sink_needed_c_per_w
    if needed is None or needed <= 0:
        return None
    return thermal.sink_to_buy_c_per_w(needed, path.power_w * sharing)


def _standing(checks: tuple[Check, ...]) -> tuple[Standing, tuple[str, ...]]:
    """The worst of the checks, and the sentences of those that are not met."""
    failed = tuple(item.sentence for item in checks if item.outcome == "fail")
    if failed:
        return "fail", failed
    near = tuple(item.sentence for item in checks if item.outcome == "marginal")
    return ("marginal", near) if near else ("pass", ())


def resolution(valve: Ledger, facts: SiteFacts) -> float:
    """The least difference in net energy that means anything, Wh a day.

    A share of the deciding period's harvest; where that is next to nothing (a polar winter), of a tenth of the year's.
    """
    days = sum(facts.period_days)
    mean_wh = valve.year_delivered_wh / days if days > 0 else 0.0
    return RESOLUTION_FRAC * max(valve.delivered_wh[facts.deciding_period], 0.1 * mean_wh)


def _entry(item: Candidate, period: int, standing: Standing | None = None) -> Entry:
    typical, maximum = item.typical, item.maximum
    return Entry(
        item.key, standing or item.standing, typical.net_wh[period], typical.year_heat_wh, maximum.net_wh[period]
    )


def _ranked(job: Job, candidates: list[Candidate], period: int, resolution_wh: float) -> list[Candidate]:
    """In order of rank, then what failed by net energy, then the perfect valve."""
    keys, tied = order([_entry(item, period) for item in candidates], resolution_wh)
    if job.charge.blocks_at_night == "yes" and NONE_KEY in keys:
        keys = [NONE_KEY, *(key for key in keys if key != NONE_KEY)]  # nothing is left for a diode to save
    by_key = {item.key: item for item in candidates}
    ranked = [replace(by_key[key], rank=place + 1, tied=key in tied) for place, key in enumerate(keys)]
    failed = sorted((c for c in candidates if c.standing == "fail"), key=lambda c: (_last(c, period), c.key))
    return ranked + failed + [c for c in candidates if c.standing == "reference"]


def _last(candidate: Candidate, period: int) -> float:
    """Sorts by falling net energy, what has no ledger last."""
    net_wh = candidate.typical.net_wh[period]
    return -net_wh if math.isfinite(net_wh) else math.inf


def _under_double_rule(
    job: Job, worst: Worst, candidates: list[Candidate], facts: SiteFacts, resolution_wh: float
) -> str | None:
    """The choice were VRRM held to 2 × cold Voc; None where that changes nothing or is the rule already."""
    if (ratings.voc_factor(job.rule) or 0.0) >= 2.0 or job.charge.blocks_at_night == "yes":
        return None
    period = facts.deciding_period
    entries = []
    for item in candidates:
        too_low = item.part is not None and item.part.vrrm_v < 2.0 * worst.cold_voc_v
        standing: Standing = "fail" if too_low else item.standing
        entries.append(_entry(item, period, standing))
    keys, _ = order(entries, resolution_wh)
    best = next((item.key for item in candidates if item.rank == 1), None)
    if best is None or (keys and keys[0] == best):
        return None
    return keys[0] if keys else "nothing"


# --- facts and notes --------------------------------------------------------------------------------------------------


def _facts(
    job: Job,
    site: Site,
    string: _String,
    shunts: tuple[float, float, float],
    worst: Worst,
    periods: Periods,
    solved: _Solved,
) -> SiteFacts:
    days, array, label = site.days, job.array, job.array.label
    dark = unlit(days.poa_w_m2)
    dark_h = periods.per_day_h @ dark.astype(np.float64)
    night_c = periods.per_day_h @ np.where(dark, days.air_c, 0.0)
    mean_c = np.where(dark_h > 0, night_c / np.maximum(dark_h, 1e-9), np.nan)
    field, misfit = ("", 0.0) if string.fit is None else string.fit.worst
    return SiteFacts(
        climate_source=days.source,
        climate_rough=days.rough,
        periods=periods.names,
        period_days=tuple(float(d) for d in periods.days),
        deciding_period=solved.deciding,
        sun_kwh_m2=tuple(float(s) / 1000.0 for s in periods.per_day_h @ days.poa_w_m2),
        dark_hours=tuple(float(h) for h in dark_h),
        night_air_c=tuple(float(t) for t in mean_c),
        record_low_c=days.record_low_c,
        record_high_c=days.record_high_c,
        string_voc_v=label.voc_v * array.modules_in_series,
        cold_voc_v=worst.cold_voc_v,
        cold_voc_method=cold_voc(job, days)[1],
        hot_vmp_v=worst.hot_vmp_v,
        reverse_stress_v=worst.stress_v,
        night_v=job.bank.at_night_v,
        day_v=job.bank.by_day_v,
        full_v=job.bank.full_v,
        loop_ohm=job.loop_ohm,
        strings=array.strings,
        array_w=label.vmp_v * label.imp_a * array.modules_in_series * array.strings,
        cells=label.series_cells,
        box_hottest_c=worst.box_c,
        dark_shunt_ohm=shunts,
        label_misfit_frac=misfit,
        label_misfit_field=field,
        label_method="single-diode parameters as stated" if string.fit is None else string.fit.method,
    )


def _site_assumptions(job: Job, site: Site) -> tuple[Assumption, ...]:
    """What the site's part of the study filled in."""
    days, rows = site.days, []
    if days.record_low_assumed:
        rows.append(Assumption("record_low_c", f"{days.record_low_c:.0f} °C", "estimated 20-year low"))
    if days.record_high_assumed:
        rows.append(Assumption("record_high_c", f"{days.record_high_c:.0f} °C", "estimated 20-year high"))
    if not site.stated:
        if job.plane.tilt_deg is None:
            rows.append(Assumption("tilt_deg", f"{site.plane.tilt_deg:.0f}°", "latitude, within 10° to 60°"))
        if job.plane.azimuth_deg is None:
            rows.append(Assumption("azimuth_deg", f"{site.plane.azimuth_deg:.0f}°", "towards the equator"))
        if job.climate.altitude_m is None:
            rows.append(Assumption("altitude_m", f"{site.altitude_m:.0f} m", "place or packaged altitude table"))
    return tuple(rows)


def _notes(
    job: Job, site: Site, string: _String, choice: Candidate | None, candidates: list[Candidate]
) -> tuple[Note, ...]:
    """Remarks with stable codes."""
    notes = []
    if site.days.rough:
        notes.append(Note("climate_rough", f"climate: {site.days.source}"))
    notes += _unsettled(candidates)
    reading = job.array.night_reading
    if reading is not None:
        _, exists = string.spec.dark_shunt_from_reading_ohm(reading.reading_a, reading.terminal_v, reading.cell_c)
        if not exists:
            notes.append(
                Note(
                    "night_reading_low",
                    f"the night reading of {reading.reading_a:g} A is less than the model's cells take by themselves; "
                    "it is used as the lowest the model can give",
                )
            )
    if job.charge.blocks_at_night == "unknown" and job.charge.controller != "shunt":
        bare = next(item for item in candidates if item.key == NONE_KEY).typical
        net_ah = max((d + n for d, n in zip(bare.net_ah, bare.night_drain_ah, strict=True)), default=0.0)
        notes.append(
            Note(
                "blocking_unknown",
                "whether the controller blocks at night is unknown: the string's drain is given as if it did not. If "
                "it does, "
                f"that drain is zero for every candidate, and no diode is best, with up to {net_ah:.2f} Ah a day net",
            )
        )
    if job.charge.controller == "shunt" and choice is not None and choice.part is not None:
        notes.append(_shunted_note(job, choice))
    if choice is not None and choice.part is not None:
        for remark in choice.part.warnings:
            notes.append(Note(f"part_{remark.code}", f"{choice.title}: {remark.sentence}"))
        notes += _outside_print(job, choice)
    if string.fit is not None and string.fit.worst[1] > 0.005:
        field, misfit = string.fit.worst
        notes.append(Note("label_misfit", f"the module model misses the label's {field} by {100 * misfit:.1f} %"))
    return tuple(notes)


def _shunted_note(job: Job, choice: Candidate) -> Note:
    """What leaks back while the regulator holds the panel shorted, by day and hot: in no ledger, so said here."""
    part = choice.part
    assert part is not None  # noqa: S101
    junction = np.array(choice.hottest_junction_c or 60.0)
    legs = part.parallel_legs if job.legs == "both" else 1
    leaks = reverse_a(DiodeCells.of([part.typical, part.maximum], [legs, legs]), np.array(job.bank.full_v), junction)
    low, high = (float(x) for x in leaks)
    return Note(
        "shunted_leak",
        f"while the regulator shorts the panel the hot diode leaks {milli(low)} to {milli(high)} back at worst; "
        "these minutes "
        "are not in the ledger",
    )


def _outside_print(job: Job, choice: Candidate) -> list[Note]:
    """Where the job takes the chosen part outside what its sheets print."""
    part = choice.part
    if part is None:
        return []
    forward = [p for sheet in part.sheets for p in sheet.forward]
    reverse = [p for sheet in part.sheets for p in sheet.reverse if p.junction_c is not None]
    notes = []
    strings = job.array.strings if job.placement == "array" else 1
    amps = job.heat.current_factor * job.array.label.isc_a * strings / (part.parallel_legs if job.legs == "both" else 1)
    if forward and amps > 1.01 * (most := max(p.current_a for p in forward)):
        notes.append(
            Note(
                "above_printed_current",
                f"{choice.title}: {amps:.1f} A a leg; its drop is printed up to {most:g} A only",
            )
        )
    hottest = choice.hottest_junction_c
    if reverse and hottest is not None and hottest > 5.0 + (top := max(p.junction_c or 0.0 for p in reverse)):
        notes.append(
            Note(
                "above_printed_heat",
                f"{choice.title}: its junction may reach {hottest:.0f} °C; leakage is printed up to {top:g} °C only",
            )
        )
    return notes


def _unsettled(candidates: list[Candidate]) -> list[Note]:
    """Candidates without a full ledger, because some of their cells did not settle."""
    burnt = [c.title for c in candidates if c.standing == "fail" and not math.isfinite(c.maximum.year_net_wh)]
    open_ended = [c.title for c in candidates if c.standing != "fail" and not math.isfinite(c.maximum.year_net_wh)]
    notes = []
    if burnt:
        some = ", ".join(burnt[:6]) + (f" and {len(burnt) - 6} more" if len(burnt) > 6 else "")
        notes.append(Note("no_ledger", f"no ledger for {some}: the current would take their junctions past 400 °C"))
    if open_ended:
        notes.append(Note("not_converged", f"some cells did not settle for {', '.join(open_ended)}; they are left out"))
    return notes


def _second_source(
    job: Job, spec: StringSpec, shunt_ohm: float, facts: SiteFacts, worst: Worst, choice: Candidate | None
) -> SecondSource | None:
    """Drain of the dark array while another source holds the bank up, at the deciding period's night."""
    bus_v = job.other_source_v
    if bus_v is None:
        return None
    air = facts.night_air_c[facts.deciding_period]
    night = np.array([air if math.isfinite(air) else facts.record_low_c])
    laws: list[DiodeLaw] = [NoDiode(), NoDiode(), NoDiode()]
    legs = [1, 1, 1]
    if choice is not None and choice.part is not None:
        laws[1:] = [choice.part.typical, choice.part.maximum]
        legs[1:] = [choice.part.parallel_legs if job.legs == "both" else 1] * 2
    carried = job.array.strings if job.placement == "array" else 1
    ohm = (job.loop_ohm + job.bank.internal_ohm) * job.array.strings
    dark = spec.cells(np.zeros(1), night, shunt_ohm)
    state = solve(LoopInput(dark, DiodeCells.of(laws, legs, carried), bus_v, ohm, night, 0.0))
    bare, typical, maximum = (float(-x) * job.array.strings for x in state.current_a[0])
    text = (
        f"at {bus_v:g} V by night the bare array takes {milli(bare)}"
        + ("" if choice is None or choice.part is None else f", behind the diode {milli(typical)} to {milli(maximum)}")
        + f"; the diode may see {worst.stress_v:.1f} V. One diode per solar string; a turbine's rectifier blocks"
    )
    return SecondSource(bus_v, bare, typical, maximum, worst.stress_v, text)


def _trace(
    site: Site, periods: Periods, facts: SiteFacts, table: _Table, solved: _Solved, choice: Candidate | None
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


def part_titles(parts: tuple[Part, ...]) -> dict[str, str]:
    """Key to type, for pages."""
    return {part.key: part.type for part in parts}
