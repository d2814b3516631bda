"""The job's place, string and worst case, worked out once for all candidates."""

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from server.errors import InputError
from server.physics import climate, pv, thermal
from server.physics.climate import SiteDays
from server.physics.pv import SingleDiode, StringSpec
from server.selection import ratings
from server.selection.heating import Worst
from server.selection.job import Job
from server.selection.ledger import Periods, unlit
from server.selection.result import Assumption, SiteFacts

FloatArray = NDArray[np.float64]

STEP_MINUTES = 15
FULL_SUN_W_M2 = 1000.0  # a string's hot cell: full sun on the hottest day
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


def site_days(job: Job) -> Site:
    """The days that stand for the year, from the climate the job chose."""
    c = job.climate
    if c.source == "stated_day":
        stated_plane = _plane(job, 0.0)
        days = climate.stated_day(
            given("peak_sun_h", c.peak_sun_h),
            given("daylight_h", c.daylight_h),
            given("day_air_c", c.day_air_c),
            given("night_air_c", c.night_air_c),
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
        place = climate.Site(given("lat_deg", c.lat_deg), given("lon_deg", c.lon_deg), c.altitude_m)
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


def given(name: str, value: float | None) -> float:
    """`value`, or an InputError that it is missing."""
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


@dataclass(frozen=True, slots=True, eq=False)
class StringFit:
    """The string's parameters, and how they were come by."""

    spec: StringSpec
    fit: pv.LabelFit | None
    reading_ok: bool = True


def string_spec(job: Job) -> StringFit:
    """The string's parameters, fitted to the label unless they are stated."""
    array, label = job.array, job.array.label
    fitted = None if array.single_diode is not None else pv.fit_label(label)
    module: SingleDiode = array.single_diode if array.single_diode is not None else fitted.module  # type: ignore[union-attr]
    spec = StringSpec(
        module, label.series_cells, label.isc_a, array.modules_in_series, array.soiling_frac, array.mismatch_frac
    )
    return StringFit(spec, fitted)


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
        return given("box_day_c", heat.box_day_c)
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


def site_facts(
    job: Job,
    site: Site,
    string: StringFit,
    shunts: tuple[float, float, float],
    worst: Worst,
    periods: Periods,
    deciding: int,
) -> SiteFacts:
    """What the answer tells of the site. deciding: the period that decides."""
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
        deciding_period=deciding,
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


def site_assumptions(job: Job, site: Site) -> tuple[Assumption, ...]:
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
    if job.heat.box in ("light_box", "dark_box") and job.heat.box_area_m2 is None:
        rows.append(Assumption("box_area_m2", "not given", "what the diodes add to their box's warmth is not counted"))
    return tuple(rows)
