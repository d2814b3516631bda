"""Site and monthly climate, or one stated day -> light on the module, air and cell temperature, step by step."""

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from server.errors import InputError
from server.physics.presets import (
    COLDEST_AIR_C,
    HOTTEST_AIR_C,
    MonthlyClimate,
    require_records,
    twelve,
)
from server.physics.presets import PRESETS as PRESETS
from server.physics.presets import Preset as Preset
from server.physics.presets import monthly_from_grid as monthly_from_grid
from server.physics.presets import monthly_from_h as monthly_from_h
from server.physics.presets import monthly_from_kt as monthly_from_kt
from server.physics.presets import monthly_from_preset as monthly_from_preset
from server.physics.presets import preset as preset
from server.physics.sky import (
    MONTH_DAYS,
    MONTHS,
    FloatArray,
    IntArray,
    on_plane_w_m2,
    require_between,
    steps_per_day,
    sun_year,
    three_days_of_light,
)
from server.physics.sky import Site as Site
from server.physics.sky import altitude_default_m as altitude_default_m

DULL, MIDDLE, CLEAR, DARK = range(4)
DAY_KINDS = ("dull", "middle", "clear", "dark")

# Daily temperature range of the three days over the month's mean range; the mean itself hardly moves (-0.5, 0.1, 0.4 K,
# and the other way round in northern winters). Measured by us on 32 weather files, days sorted by sunlight; sd 0.12.
# A dark day (snow on the module, a vehicle under cover) has the month's ordinary air.
RANGE_FACTOR = np.array([0.79, 1.02, 1.19, 1.0])
# A module facing a clear night sky is colder than the air: -2 K clear, -1 K overcast, from the radiative balance of
# pvlib's faiman_rad with the measured sky of 7 sites. Under snow or a roof it does not face the sky.
NIGHT_COOLING_K = np.array([1.0, 1.5, 2.0, 0.0])

HIGHEST_PEAK_W_M2 = 1400.0  # a stated day may not outshine the sun outside the atmosphere
RECORD_BELOW_NIGHT_K, RECORD_ABOVE_DAY_K = 15.0, 10.0  # our guess where a stated day comes without records


# --- cell temperature -------------------------------------------------------------------------------------------------


def faiman_c(
    poa_w_m2: ArrayLike, air_c: ArrayLike, wind_m_s: ArrayLike, u0: float = 25.0, u1: float = 6.84
) -> FloatArray:
    """Module temperature, wind at module height. Shapes broadcast.

    Source:  Faiman, Prog. Photovolt. 16 (2008) 307-315; u0 in W/m2K, u1 in W/m2K per m/s.
    """
    return np.asarray(np.asarray(air_c) + np.asarray(poa_w_m2) / (u0 + u1 * np.asarray(wind_m_s)))


def king_module_c(poa_w_m2: ArrayLike, air_c: ArrayLike, wind_m_s: ArrayLike, a: float, b: float) -> FloatArray:
    """Temperature of the module's back, wind at 10 m. Shapes broadcast. Source: King et al., SAND2004-3535, eq. 11."""
    return np.asarray(np.asarray(air_c) + np.asarray(poa_w_m2) * np.exp(a + b * np.asarray(wind_m_s)))


def king_cell_c(
    poa_w_m2: ArrayLike, air_c: ArrayLike, wind_m_s: ArrayLike, a: float, b: float, front_to_back_k: float
) -> FloatArray:
    """Cell temperature, `front_to_back_k` hotter than the back at 1000 W/m2. Source: King et al. 2004, eq. 12."""
    return king_module_c(poa_w_m2, air_c, wind_m_s, a, b) + np.asarray(poa_w_m2) / 1000.0 * front_to_back_k


def ross_c(poa_w_m2: ArrayLike, air_c: ArrayLike, noct_c: float) -> FloatArray:
    """Cell temperature from the label's NOCT, whatever the wind. Shapes broadcast.

    Source:  Ross, Proc. 14th IEEE PVSC (1980); NOCT is the cell at 800 W/m2, air at 20 °C.
    """
    return np.asarray(np.asarray(air_c) + (noct_c - 20.0) / 800.0 * np.asarray(poa_w_m2))


@dataclass(frozen=True, slots=True)
class Mounting:
    """How a module sheds its heat: King's three numbers, or Faiman's law where there are none."""

    label: str
    king: tuple[float, float, float] | None = None

    def cell_c(self, poa_w_m2: ArrayLike, air_c: ArrayLike, wind_m_s: float) -> FloatArray:
        """Cell temperature in the light. Shapes broadcast."""
        if self.king is None:
            return faiman_c(poa_w_m2, air_c, wind_m_s)
        return king_cell_c(poa_w_m2, air_c, wind_m_s, *self.king)


# King et al. 2004, table 1: close roof mount glass/cell/glass; insulated back glass/cell/polymer. At 1000 W/m2 and
# 1 m/s the three stand 31, 50 and 58 K above the air.
MOUNTINGS: Mapping[str, Mounting] = MappingProxyType(
    {
        "open_rack": Mounting("pole or ground rack, air on both sides"),
        "roof_gap": Mounting("roof with a gap of 5 to 10 cm", (-2.98, -0.0471, 1.0)),
        "flat_insulated": Mounting("flat on a van, a boat or an insulated roof", (-2.81, -0.0455, 0.0)),
    }
)


@dataclass(frozen=True, slots=True)
class Plane:
    """The module's plane and what surrounds it. Azimuth is clockwise from north: 180 faces south.

    Wind is taken at module height by `open_rack`, at 10 m by the other two; 1 m/s where nobody knows. A NOCT from
    the label, if given, takes the place of the mounting's law.

    Raises:  InputError for a value out of bounds.
    """

    tilt_deg: float
    azimuth_deg: float
    albedo_frac: float = 0.2  # bare ground and grass; snow about 0.6
    mounting: str = "open_rack"
    wind_m_s: float = 1.0
    noct_c: float | None = None

    def __post_init__(self) -> None:
        """Refuse what no module does."""
        require_between("tilt_deg", self.tilt_deg, 0.0, 90.0, "a tilt from the horizontal")
        require_between("azimuth_deg", self.azimuth_deg, 0.0, 360.0, "an azimuth clockwise from north")
        require_between("albedo_frac", self.albedo_frac, 0.0, 1.0, "a reflected share of the light")
        require_between("wind_m_s", self.wind_m_s, 0.0, 30.0, "a mean wind speed")
        if self.mounting not in MOUNTINGS:
            raise InputError("mounting", f"{self.mounting!r} is not a mounting: choose one of {', '.join(MOUNTINGS)}")
        if self.noct_c is not None:
            require_between("noct_c", self.noct_c, 30.0, 80.0, "a nominal operating cell temperature in °C")

    def cell_c(self, poa_w_m2: ArrayLike, air_c: ArrayLike) -> FloatArray:
        """Cell temperature in the light. Shapes broadcast."""
        if self.noct_c is not None:
            return ross_c(poa_w_m2, air_c, self.noct_c)
        return MOUNTINGS[self.mounting].cell_c(poa_w_m2, air_c, self.wind_m_s)


def default_plane(lat_deg: float, mounting: str = "open_rack") -> Plane:
    """Facing the equator (south on it, where it hardly matters), tilted by the latitude but between 10 and 60."""
    require_between("lat_deg", lat_deg, -90.0, 90.0, "a latitude")
    return Plane(min(max(abs(lat_deg), 10.0), 60.0), 180.0 if lat_deg >= 0 else 0.0, mounting=mounting)


# --- air temperature over the day -------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class AirCurve:
    """Constants of a sine by day and a decay by night: hours from noon to the maximum, from sunrise to the minimum."""

    maximum_lag_h: float
    minimum_lag_h: float
    decay: float
    decays_until_minimum: bool = False  # else the decay counts in nights, sunset to sunrise


# Parton & Logan, Agric. Meteorol. 23 (1981) 205-216: a = 1.86, b = 2.20, c = -0.17. Their sine has the argument
# pi·m/(Y + 2a), m hours after the minimum, which puts the maximum a + c after noon. Against 32 weather files: rmse
# 0.9 K, the least of eight models, and a night leakage factor 2^(T/10) within 2 %.
PARTON_LOGAN = AirCurve(maximum_lag_h=1.86 - 0.17, minimum_lag_h=-0.17, decay=2.20)
SHORTEST_DAY_H, LONGEST_DAY_H = 1.0, 23.0  # beyond, there is no sunset to reckon from


def sine_decay_air_c(
    solar_hour: ArrayLike, day_h: ArrayLike, air_min_c: ArrayLike, air_max_c: ArrayLike, curve: AirCurve = PARTON_LOGAN
) -> FloatArray:
    """Air temperature at a solar hour of a day of `day_h` hours: a sine while the sun is up, then a decay.

    It reaches the next sunrise about a tenth of the evening's fall too warm, a harmless step. Shapes broadcast.
    `day_h` must lie strictly between 0 and 24.
    """
    hour, day_h = np.asarray(solar_hour, dtype=np.float64), np.asarray(day_h, dtype=np.float64)
    low = np.asarray(air_min_c, dtype=np.float64)
    span = np.asarray(air_max_c, dtype=np.float64) - low
    coldest, sunset = 12.0 - day_h / 2.0 + curve.minimum_lag_h, 12.0 + day_h / 2.0
    half_wave_h = day_h + 2.0 * (curve.maximum_lag_h - curve.minimum_lag_h)
    by_day = low + span * np.sin(np.pi * (hour - coldest) / half_wave_h)
    at_sunset = span * np.sin(np.pi * (sunset - coldest) / half_wave_h)
    decay_h = 24.0 - day_h + (curve.minimum_lag_h if curve.decays_until_minimum else 0.0)
    by_night = low + at_sunset * np.exp(-curve.decay * ((hour - sunset) % 24.0) / decay_h)
    return np.where((hour > coldest) & (hour < sunset), by_day, by_night)


def harmonic_air_c(
    solar_hour: ArrayLike,
    air_min_c: ArrayLike,
    air_max_c: ArrayLike,
    mean: float = 0.5,
    first: float = 0.5,
    second: float = 0.0,
    phase_rad: float = -0.75 * math.pi,
) -> FloatArray:
    """Air temperature as one or two waves a day; as it stands, one wave with its peak at 15 h. Shapes broadcast."""
    angle = np.pi / 12.0 * np.asarray(solar_hour, dtype=np.float64)
    share = mean + first * np.sin(phase_rad + angle) + second * np.sin(phase_rad + 2.0 * angle)
    return np.asarray(share * np.asarray(air_max_c) + (1.0 - share) * np.asarray(air_min_c))


def daily_air_c(solar_hour: ArrayLike, day_h: ArrayLike, air_min_c: ArrayLike, air_max_c: ArrayLike) -> FloatArray:
    """Air temperature: Parton & Logan, or one wave where the day is shorter than 1 h or longer than 23. Broadcasts."""
    day_h = np.asarray(day_h, dtype=np.float64)
    ordinary = sine_decay_air_c(solar_hour, np.clip(day_h, SHORTEST_DAY_H, LONGEST_DAY_H), air_min_c, air_max_c)
    polar = (day_h < SHORTEST_DAY_H) | (day_h > LONGEST_DAY_H)
    return np.where(polar, harmonic_air_c(solar_hour, air_min_c, air_max_c), ordinary)


# --- the days ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class SiteDays:
    """The days a job is computed for, end to end: every row one step, every day from solar midnight to solar midnight.

    A year's total of any result x is sum(x · step_h · weight_days): `weight_days` says how many days of the year the
    row's day stands for. Results are averaged, never the light.

    Shapes:  [T] each, T = days · steps a day. `month` 0..11; `day_kind` indexes DAY_KINDS; `solar_hour` is the middle
             of the step, mean solar time.
    """

    month: IntArray
    day_kind: IntArray
    solar_hour: FloatArray
    poa_w_m2: FloatArray
    air_c: FloatArray
    cell_c: FloatArray
    weight_days: FloatArray
    day_length_h: FloatArray
    step_h: float
    record_low_c: float
    record_high_c: float
    record_low_assumed: bool
    record_high_assumed: bool
    source: str
    rough: bool

    @property
    def steps_per_day(self) -> int:
        """Rows of one day."""
        return round(24.0 / self.step_h)

    def by_day(self, values: NDArray[np.float64]) -> FloatArray:
        """Rows folded into days. Shapes: [T, ...] -> [days, steps a day, ...]."""
        return values.reshape(-1, self.steps_per_day, *values.shape[1:])


def three_day_year(
    site: Site,
    monthly: MonthlyClimate,
    plane: Plane,
    step_minutes: int = 15,
    dark_days_per_month: ArrayLike = 0,
    *,
    linke_turbidity: float | None = None,
) -> SiteDays:
    """A year as twelve months of three equally likely days: dull, middle, clear.

    On 32 weather files, plane at 30°: yearly energy +0.2 ± 1.4 %, sum(G²)/sum(G) -2.3 ± 4.2 %. A month with dark days
    (snow, a vehicle in store) has d of them without any light, and the three share the rest. The hazier the air, the
    flatter the clear day: `linke_turbidity` takes the place of pvlib's map.

    Shapes:  `dark_days_per_month` one number or [12]; T = 12 · 3 · steps, or 12 · 4 · steps with dark days.
    Raises:  InputError for a step that does not divide the day or more dark days than the month has.
    """
    dark_days = _dark_days(dark_days_per_month)
    kinds = np.arange(4 if dark_days.any() else 3)
    sun = sun_year(site, step_minutes, linke_turbidity)
    poa = on_plane_w_m2(sun, three_days_of_light(sun, monthly.kt), plane.tilt_deg, plane.azimuth_deg, plane.albedo_frac)
    if kinds.size == 4:
        poa = np.concatenate((poa, np.zeros_like(poa[:, :1])), axis=1)
    day_h = (sun.sunset_rad * 24.0 / np.pi)[:, None, None]
    mean = (monthly.air_min_c + monthly.air_max_c)[:, None] / 2.0
    half_range = (monthly.air_max_c - monthly.air_min_c)[:, None] / 2.0 * RANGE_FACTOR[kinds]
    air = daily_air_c(sun.solar_hour, day_h, (mean - half_range)[..., None], (mean + half_range)[..., None])
    cell = np.where(poa > 0.0, plane.cell_c(poa, air), air - NIGHT_COOLING_K[kinds, None])
    weight = np.repeat(((MONTH_DAYS - dark_days) / 3.0)[:, None], kinds.size, axis=1)
    if kinds.size == 4:
        weight[:, DARK] = dark_days
    return SiteDays(
        month=np.broadcast_to(np.arange(12)[:, None, None], poa.shape).ravel(),
        day_kind=np.broadcast_to(kinds[:, None], poa.shape).ravel(),
        solar_hour=np.broadcast_to(sun.solar_hour, poa.shape).ravel(),
        poa_w_m2=poa.ravel(),
        air_c=air.ravel(),
        cell_c=cell.ravel(),
        weight_days=np.broadcast_to(weight[..., None], poa.shape).ravel(),
        day_length_h=np.broadcast_to(day_h, poa.shape).ravel(),
        step_h=sun.step_h,
        record_low_c=monthly.record_low_c,
        record_high_c=monthly.record_high_c,
        record_low_assumed=monthly.record_low_assumed,
        record_high_assumed=monthly.record_high_assumed,
        source=monthly.source,
        rough=monthly.rough,
    )


def _dark_days(dark_days_per_month: ArrayLike) -> FloatArray:
    """Dark days of each month. Shape [12]. Raises: InputError for less than none or more than the month has."""
    field = "dark_days_per_month"
    one = np.ndim(dark_days_per_month) == 0
    days = twelve(field, np.full(12, dark_days_per_month) if one else dark_days_per_month)
    for month, value, length in zip(MONTHS, days, MONTH_DAYS, strict=True):
        if not 0.0 <= value <= length:
            raise InputError(field, f"{month}: {value:g} dark days do not fit: it must lie between 0 and {length}")
    return days


def stated_day(
    peak_sun_h: float,
    daylight_h: float,
    day_air_c: float,
    night_air_c: float,
    plane: Plane,
    step_minutes: int = 15,
    *,
    record_low_c: float | None = None,
    record_high_c: float | None = None,
) -> SiteDays:
    """One day as an installer states it: peak sun hours on the module, daylight, air by day and by night.

    The light is a half sine round noon, each step holding its own mean, so that the day's sum is exact. The module is
    at the stated air by night: whoever states a temperature has the sky's cooling in it or does not want it. Of the
    plane only mounting, wind and NOCT matter. The day stands for the whole year; month and day kind are 0.

    Raises:  InputError for a day the sun cannot make.
    """
    require_between("daylight_h", daylight_h, 0.0, 24.0, "a day's hours of daylight")
    # A half sine of peak P over L hours sums to 2·P·L/pi.
    most_h = HIGHEST_PEAK_W_M2 / 1000.0 * 2.0 * daylight_h / math.pi
    if not 0.0 <= peak_sun_h <= most_h:
        raise InputError(
            "peak_sun_h",
            f"{peak_sun_h:g} peak sun hours do not fit into {daylight_h:g} h of daylight: it must lie between 0 and "
            f"{most_h:.2f}, where noon reaches {HIGHEST_PEAK_W_M2:g} W/m²",
        )
    for field, value in (("day_air_c", day_air_c), ("night_air_c", night_air_c)):
        require_between(field, value, COLDEST_AIR_C, HOTTEST_AIR_C, "an air temperature in °C")
    coldest_c, warmest_c = min(day_air_c, night_air_c), max(day_air_c, night_air_c)
    low = max(coldest_c - RECORD_BELOW_NIGHT_K, COLDEST_AIR_C) if record_low_c is None else record_low_c
    high = min(warmest_c + RECORD_ABOVE_DAY_K, HOTTEST_AIR_C) if record_high_c is None else record_high_c
    require_records(low, high, coldest_c, warmest_c)

    steps = steps_per_day(step_minutes)
    step_h = 24.0 / steps
    edge = np.arange(steps + 1, dtype=np.float64) * step_h
    sunrise, sunset = 12.0 - daylight_h / 2.0, 12.0 + daylight_h / 2.0
    since_sunrise = np.clip(edge, sunrise, sunset) - sunrise
    until_edge = 0.5 * (1.0 - np.cos(np.pi * since_sunrise / max(daylight_h, 1e-9)))
    poa = 1000.0 * peak_sun_h * np.diff(until_edge) / step_h
    sun_up = (edge[1:] > sunrise) & (edge[:-1] < sunset)
    air = np.where(sun_up, day_air_c, night_air_c)
    return SiteDays(
        month=np.zeros(steps, dtype=np.int64),
        day_kind=np.zeros(steps, dtype=np.int64),
        solar_hour=0.5 * (edge[:-1] + edge[1:]),
        poa_w_m2=poa,
        air_c=air,
        cell_c=np.where(poa > 0.0, plane.cell_c(poa, air), air),
        weight_days=np.full(steps, 365.0),
        day_length_h=np.full(steps, daylight_h),
        step_h=step_h,
        record_low_c=low,
        record_high_c=high,
        record_low_assumed=record_low_c is None,
        record_high_assumed=record_high_c is None,
        source="stated day",
        rough=False,
    )
