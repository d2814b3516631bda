"""Site and monthly clearness -> sun, three days of light a month, light on a tilted plane."""

import math
from dataclasses import dataclass, fields
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike, NDArray

from server.errors import InputError
from server.physics.lazy import pvlib_module

FloatArray = NDArray[np.float64]
IntArray = NDArray[np.int64]

MONTHS = (
    "January", "February", "March", "April", "May", "June",
    "July", "August", "September", "October", "November", "December",
)  # fmt: skip
MONTH_DAYS = np.array([31, 28, 31, 30, 31, 30, 31, 31, 30, 31, 30, 31])
MONTH_OF_DAY = np.repeat(np.arange(12), MONTH_DAYS)  # [365], day 1 of the year first
YEAR = 2025  # any year without 29 February: the sun of one day differs by a few hundredths of a degree between years

SOLAR_CONSTANT_W_M2 = 1361.0  # Kopp & Lean, Geophys. Res. Lett. 38 (2011) L01706
DARK_BELOW_KWH_M2 = 0.01  # a month with less than this outside the atmosphere has no daylight worth dividing by
LOW_SUN_DEG = 87.5  # from this zenith angle on, all light is taken as diffuse

LOWEST_ALTITUDE_M, HIGHEST_ALTITUDE_M = -500.0, 9000.0


@dataclass(frozen=True, slots=True)
class Site:
    """A place on Earth: degrees north, degrees east, metres above the sea (None: looked up when needed).

    Raises:  InputError for a value that is not a number or lies outside its bounds. Longitude may be written up to
             one turn either way; it is brought into [-180, 180) by `wrapped_lon_deg`.
    """

    lat_deg: float
    lon_deg: float
    altitude_m: float | None = None

    def __post_init__(self) -> None:
        """Refuse what is no place on Earth."""
        require_between("lat_deg", self.lat_deg, -90.0, 90.0, "a latitude")
        require_between("lon_deg", self.lon_deg, -360.0, 360.0, "a longitude")
        if self.altitude_m is not None:
            require_between("altitude_m", self.altitude_m, LOWEST_ALTITUDE_M, HIGHEST_ALTITUDE_M, "an altitude on land")

    @property
    def wrapped_lon_deg(self) -> float:
        """Longitude in [-180, 180): +180 and -180 are the same meridian and give the same numbers."""
        return wrapped_lon_deg(self.lon_deg)

    @property
    def height_m(self) -> float:
        """The altitude given, else the looked-up one."""
        return altitude_default_m(self.lat_deg, self.lon_deg) if self.altitude_m is None else self.altitude_m


def require_between(field: str, value: float, lowest: float, highest: float, what: str) -> None:
    """Nothing, or an InputError saying that `value` is not `what`. NaN and the infinities lie between no bounds."""
    if not lowest <= value <= highest:
        raise InputError(field, f"{value:g} is not {what}: it must lie between {lowest:g} and {highest:g}")


def wrapped_lon_deg(lon_deg: float) -> float:
    """The same meridian in [-180, 180)."""
    wrapped = (lon_deg + 180.0) % 360.0 - 180.0
    return wrapped if wrapped < 180.0 else -180.0  # a tiny negative angle may round up to a full turn


def altitude_default_m(lat_deg: float, lon_deg: float) -> float:
    """Altitude from the 5-minute table that comes with pvlib.

    Against 32 weather stations: median error 20 m, mean 52 m, worst +353 m in foothills; 0 at sea, and not to be
    trusted on ice sheets. Good enough to start from, so it is shown and may be overwritten.
    """
    require_between("lat_deg", lat_deg, -90.0, 90.0, "a latitude")
    require_between("lon_deg", lon_deg, -360.0, 360.0, "a longitude")
    altitude_m = float(pvlib_module("location").lookup_altitude(lat_deg, wrapped_lon_deg(lon_deg)))
    return min(max(altitude_m, LOWEST_ALTITUDE_M), HIGHEST_ALTITUDE_M)


# --- the sun outside the atmosphere -----------------------------------------------------------------------------------


def declination_rad(day: ArrayLike) -> FloatArray:
    """Declination on day 1..365 of the year. Shape of `day`. Source: Cooper, Solar Energy 12 (1969) 333-346."""
    return np.asarray(np.radians(23.45) * np.sin(2.0 * np.pi * (284.0 + np.asarray(day)) / 365.0))


def orbit_factor(day: ArrayLike) -> FloatArray:
    """Sunlight outside the atmosphere on that day over its yearly mean. Source: Duffie & Beckman, ch. 1."""
    return np.asarray(1.0 + 0.033 * np.cos(2.0 * np.pi * np.asarray(day) / 365.0))


def sunset_rad(lat_deg: float, day: ArrayLike) -> FloatArray:
    """Hour angle of sunset: 0 in the polar night, pi under the midnight sun. Shape of `day`."""
    tan_lat = math.tan(min(max(math.radians(lat_deg), -1.5707), 1.5707))  # the poles' own tangent has no end
    return np.asarray(np.arccos(np.clip(-tan_lat * np.tan(declination_rad(day)), -1.0, 1.0)))


def day_length_h(lat_deg: float, day: ArrayLike) -> FloatArray:
    """Hours from sunrise to sunset, sun as a point and no refraction. Shape of `day`."""
    return np.asarray(sunset_rad(lat_deg, day) * 24.0 / np.pi)


def extraterrestrial_kwh_m2(
    lat_deg: float, day: ArrayLike, solar_constant_w_m2: float = SOLAR_CONSTANT_W_M2
) -> FloatArray:
    """H0, what one day's sun brings to a horizontal metre outside the atmosphere. Shape of `day`.

    Source:  Duffie & Beckman, Solar Engineering of Thermal Processes, ch. 1; same form as FAO-56 eq. 21.
    """
    phi, d, ws = math.radians(lat_deg), declination_rad(day), sunset_rad(lat_deg, day)
    height = math.cos(phi) * np.cos(d) * np.sin(ws) + ws * math.sin(phi) * np.sin(d)
    return np.asarray(24.0 / np.pi * solar_constant_w_m2 / 1000.0 * orbit_factor(day) * np.maximum(height, 0.0))


def monthly_h0_kwh_m2(lat_deg: float) -> FloatArray:
    """Mean H0 of each month, kWh/m2 a day. Shape [12]."""
    h0 = extraterrestrial_kwh_m2(lat_deg, np.arange(1, 366))
    return np.asarray(np.bincount(MONTH_OF_DAY, weights=h0) / MONTH_DAYS)


def representative_days(lat_deg: float) -> IntArray:
    """For each month the day of the year whose H0 is nearest the month's mean; of equals, the one nearest mid-month.

    Klein's table (Solar Energy 19, 1977, 325-329) does as well below 60°, but may name a dark day in the month of the
    polar sunrise.  Shape [12].
    """
    day = np.arange(1, 366)
    first = np.concatenate(([0], np.cumsum(MONTH_DAYS)[:-1]))
    from_middle = np.abs(day - (first + (MONTH_DAYS + 1) / 2.0)[MONTH_OF_DAY])
    miss = np.abs(extraterrestrial_kwh_m2(lat_deg, day) - monthly_h0_kwh_m2(lat_deg)[MONTH_OF_DAY])
    score = miss + 1e-9 * from_middle
    return np.array(
        [start + 1 + np.argmin(score[start : start + n]) for start, n in zip(first, MONTH_DAYS, strict=True)]
    )


def clear_day_cap(altitude_m: float) -> float:
    """Highest share of H0 that a cloudless day lets through. Source: FAO-56 (1998) eq. 37."""
    return 0.75 + 2e-5 * altitude_m


# --- the sun's path, once a month -------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True, eq=False)
class SunYear:
    """Twelve representative days of sun over one site, S steps each, from solar midnight to solar midnight.

    Shapes:  [12] for what belongs to a month, [S] for `solar_hour`, [12, S] for the rest.
    `clear_index` is the clear day's share of H0; `dark` marks months without daylight.
    """

    step_h: float
    solar_hour: FloatArray
    h0_kwh_m2: FloatArray
    sunset_rad: FloatArray
    extra_w_m2: FloatArray
    clear_index: FloatArray
    dark: NDArray[np.bool_]
    zenith_deg: FloatArray
    azimuth_deg: FloatArray
    clear_ghi_w_m2: FloatArray
    clear_dni_w_m2: FloatArray


@lru_cache(maxsize=64)
def sun_year(site: Site, step_minutes: int = 15, linke_turbidity: float | None = None) -> SunYear:
    """Sun and clear sky on the representative days, at the middle of each step.

    All twelve days go through pvlib in one call, since each call costs some milliseconds whatever its length. Hours
    are mean solar time, UTC + longitude/15. Turbidity is pvlib's monthly map unless given. Kept for the sites asked
    for last, because a grid climate and its days need the same sun; the arrays are read-only.

    Raises:  InputError for a step that does not divide the day, or a turbidity outside 1..12.
    Source:  Ineichen & Perez, Solar Energy 73 (2002) 151-157, as in pvlib; SPA sun position (Reda & Andreas 2004).
             The Ineichen clear sky runs away with altitude (0.96 of H0 at 4061 m), hence the cap.
    """
    steps = steps_per_day(step_minutes)
    if linke_turbidity is not None:
        require_between("linke_turbidity", linke_turbidity, 1.0, 12.0, "a Linke turbidity")
    lat, lon, altitude_m = site.lat_deg, site.wrapped_lon_deg, site.height_m
    hour = (np.arange(steps) + 0.5) * 24.0 / steps
    day = representative_days(lat)
    utc_s = np.rint(((day - 1.0)[:, None] * 24.0 + hour - lon / 15.0) * 3600.0).astype("timedelta64[s]")
    pressure_pa = pvlib_module("atmosphere").alt2pres(altitude_m)
    sun = pvlib_module("solarposition").spa_python(
        (np.datetime64(f"{YEAR}-01-01", "s") + utc_s).ravel(), lat, lon, altitude_m, pressure_pa
    )
    zenith = sun["apparent_zenith"].to_numpy().reshape(12, steps)
    azimuth = sun["azimuth"].to_numpy().reshape(12, steps)
    if linke_turbidity is None:
        noons = sun.index[steps // 2 :: steps]
        turbidity = pvlib_module("clearsky").lookup_linke_turbidity(noons, lat, lon).to_numpy()[:, None]
    else:
        turbidity = np.full((12, 1), linke_turbidity)
    extra = np.asarray(pvlib_module("irradiance").get_extra_radiation(day, solar_constant=SOLAR_CONSTANT_W_M2))
    air_mass = pvlib_module("atmosphere").get_relative_airmass(zenith)
    air_mass = pvlib_module("atmosphere").get_absolute_airmass(air_mass, pressure_pa)
    with np.errstate(divide="ignore", invalid="ignore"):  # below the horizon it divides by a cosine held at 0
        clear = pvlib_module("clearsky").ineichen(
            zenith, air_mass, turbidity, altitude=max(altitude_m, 0.0), dni_extra=extra[:, None]
        )
    ghi, dni = (np.nan_to_num(np.asarray(clear[name], dtype=np.float64)) for name in ("ghi", "dni"))
    h0 = monthly_h0_kwh_m2(lat)
    clear_kwh_m2 = ghi.sum(axis=1) * 24.0 / steps / 1000.0
    dark = (h0 < DARK_BELOW_KWH_M2) | (clear_kwh_m2 <= 0.0)
    clear_index = np.minimum(clear_kwh_m2 / np.where(dark, 1.0, h0), clear_day_cap(altitude_m))
    made = SunYear(24.0 / steps, hour, h0, sunset_rad(lat, day), extra, clear_index, dark, zenith, azimuth, ghi, dni)
    for field in fields(made):
        value = getattr(made, field.name)
        if isinstance(value, np.ndarray):
            value.setflags(write=False)
    return made


def steps_per_day(step_minutes: int) -> int:
    """Steps of that length in a day. Raises: InputError unless 1..60 whole minutes divide 24 h."""
    if not (1 <= step_minutes <= 60 and step_minutes == int(step_minutes) and 1440 % int(step_minutes) == 0):
        raise InputError(
            "step_minutes", f"{step_minutes:g} minutes do not divide the day: give a divisor of 1440 between 1 and 60"
        )
    return 1440 // int(step_minutes)


# --- from a monthly mean to three days --------------------------------------------------------------------------------


def highest_kt(kt: ArrayLike, clear_index: ArrayLike) -> FloatArray:
    """The clearest day of a month of mean clearness `kt`. Shapes broadcast.

    The published line alone breaks down under a low sun, so the clear day of the place bounds it from both sides; the
    1.15 was chosen on 32 weather files (without it the yearly energy moves by less than 1 %).

    Source:  Hollands & Huget, Solar Energy 30 (1983) 195-209.
    """
    kt, clear_index = np.asarray(kt, dtype=np.float64), np.asarray(clear_index, dtype=np.float64)
    return np.maximum(np.clip(hollands_huget_kt(kt), clear_index, 1.15 * clear_index), kt + 0.02)


def hollands_huget_kt(kt: ArrayLike) -> FloatArray:
    """Highest daily clearness over a month of mean `kt`. Shape of `kt`. Source: Hollands & Huget 1983."""
    kt = np.asarray(kt, dtype=np.float64)
    return np.asarray(0.6313 + 0.267 * kt - 11.9 * (kt - 0.75) ** 8)


def tercile_kt(kt: ArrayLike, kt_max: ArrayLike) -> FloatArray:
    """Mean clearness of the dullest, the middle and the clearest third of a month's days.

    Daily clearness is spread as a truncated exponential between min(0.10, kt/2) and `kt_max`, with mean `kt`. Its one
    parameter comes by bisection; the three means are in closed form and are scaled so that their mean is `kt`.

    Shapes:  `kt` and `kt_max` [M] -> [M, 3], rising along the last axis.
    Source:  Bendt, Collares-Pereira & Rabl, Solar Energy 27 (1981) 1-5; the lower bound was chosen on 32 weather files.
    """
    kt, kt_max = np.broadcast_arrays(np.asarray(kt, dtype=np.float64), np.asarray(kt_max, dtype=np.float64))
    kt_min = np.minimum(0.10, kt / 2.0)
    # On the unit interval, and mirrored where the mean is above a half, the density only falls: exp(-b·x), b >= 0.
    mean = np.clip((kt - kt_min) / (kt_max - kt_min), 0.002, 0.998)
    mirrored = mean > 0.5
    thirds = _falling_thirds(_fall_rate(np.where(mirrored, 1.0 - mean, mean)))
    thirds = np.where(mirrored[..., None], 1.0 - thirds[..., ::-1], thirds)
    k = kt_min[..., None] + (kt_max - kt_min)[..., None] * thirds
    mean_k = k.mean(axis=-1)
    return np.asarray(k * (kt / np.where(mean_k > 0.0, mean_k, 1.0))[..., None])


def _fall_rate(mean: FloatArray) -> FloatArray:
    """The b of a density exp(-b·x) on [0, 1] whose mean is `mean` (0.002 to 0.5): 1/b - 1/(e^b - 1) only falls."""
    low, high = np.zeros_like(mean), np.full_like(mean, 600.0)
    for _ in range(60):
        b = 0.5 * (low + high)
        series = 0.5 - b / 12.0 + b**3 / 720.0
        exact = 1.0 / b - 1.0 / np.expm1(b)
        too_high = np.where(b < 1e-2, series, exact) > mean
        low, high = np.where(too_high, b, low), np.where(too_high, high, b)
    return np.asarray(0.5 * (low + high))


def _falling_thirds(b: FloatArray) -> FloatArray:
    """Means of the three equally likely thirds of a density exp(-b·x) on [0, 1]. Shapes: [M] -> [M, 3]."""
    small = b[..., None] < 1e-4  # there the closed form loses its digits: first order in b
    first_order = np.array([1.0, 3.0, 5.0]) / 6.0 - b[..., None] * np.array([7.0, 13.0, 7.0]) / 108.0
    b = np.maximum(b[..., None], 1e-4)
    whole = -np.expm1(-b)
    cuts = -np.log1p(-np.array([1.0, 2.0]) / 3.0 * whole) / b
    edge = np.concatenate((np.zeros_like(b), cuts, np.ones_like(b)), axis=-1)
    moment = edge * np.exp(-b * edge)
    return np.where(small, first_order, 1.0 / b - 3.0 * np.diff(moment, axis=-1) / whole)


def daily_diffuse_frac(kt: ArrayLike, sunset: ArrayLike) -> FloatArray:
    """Share of a day's global light that is diffuse. Shapes broadcast; `sunset` is the hour angle in radians.

    Source:  Erbs, Klein & Duffie, Solar Energy 28 (1982) 293-302, daily correlation by season.
    """
    k, sunset = np.asarray(kt, dtype=np.float64), np.asarray(sunset, dtype=np.float64)
    winter = np.where(k < 0.715, 1.0 - 0.2727 * k + 2.4495 * k**2 - 11.9514 * k**3 + 9.3879 * k**4, 0.143)
    summer = np.where(k < 0.722, 1.0 + 0.2832 * k - 2.5557 * k**2 + 0.8448 * k**3, 0.175)
    return np.where(sunset < np.radians(81.4), winter, summer)


@dataclass(frozen=True, slots=True, eq=False)
class Light:
    """Global and diffuse light on the horizontal, beam towards the sun. Shapes: [12, 3, S], dull to clear."""

    ghi_w_m2: FloatArray
    dhi_w_m2: FloatArray
    dni_w_m2: FloatArray


def three_days_of_light(sun: SunYear, kt: FloatArray) -> Light:
    """Dull, middle and clear day of each month, which together bring exactly `kt` of the month's H0.

    Global light keeps the clear day's shape and diffuse light the shape of the sun's height; the day's diffuse share
    is that of the day's own clearness. One average day would do for energy but not for anything that bends with
    current: it puts sum(G²)/sum(G) 14 % low on 32 weather files, three days 2 %.

    Shapes:  `kt` [12].
    Source:  Liu & Jordan, Solar Energy 4 (1960) 1-19 for the diffuse shape; the whole, measured by us on those files.
    """
    lit = ~sun.dark
    k = tercile_kt(kt, highest_kt(kt, sun.clear_index)) * lit[:, None]
    day_wh_m2 = (1000.0 * k * sun.h0_kwh_m2[:, None])[..., None]
    cos_zenith = np.maximum(np.cos(np.radians(sun.zenith_deg)), 0.0)
    ghi = day_wh_m2 * _unit_sum(sun.clear_ghi_w_m2)[:, None, :] / sun.step_h
    diffuse_frac = daily_diffuse_frac(k, sun.sunset_rad[:, None])[..., None]
    dhi = np.minimum(diffuse_frac * day_wh_m2 * _unit_sum(cos_zenith)[:, None, :] / sun.step_h, ghi)
    high = (sun.zenith_deg < LOW_SUN_DEG)[:, None, :]
    dni = np.where(high, (ghi - dhi) / np.where(high, cos_zenith[:, None, :], 1.0), 0.0)
    dni = np.minimum(dni, 1.15 * sun.clear_dni_w_m2[:, None, :])
    return Light(ghi, ghi - dni * cos_zenith[:, None, :], dni)


def _unit_sum(shape: FloatArray) -> FloatArray:
    """Each row over its sum; rows of zeros stay. Shapes: [12, S]."""
    total = shape.sum(axis=1, keepdims=True)
    return shape / np.where(total > 0.0, total, 1.0)


def on_plane_w_m2(sun: SunYear, light: Light, tilt_deg: float, azimuth_deg: float, albedo_frac: float) -> FloatArray:
    """Light on a tilted plane: beam, sky brighter round the sun, ground. Shape [12, 3, S].

    Where the sun is lower than `LOW_SUN_DEG` there is no beam, and the sky model is the even sky by itself.

    Source:  Hay & Davies 1980, as in pvlib. Its choice moves a month by up to 3 % (Perez higher, isotropic lower).
    """
    whole = pvlib_module("irradiance").get_total_irradiance(
        tilt_deg,
        azimuth_deg,
        sun.zenith_deg[:, None, :],
        sun.azimuth_deg[:, None, :],
        light.dni_w_m2,
        light.ghi_w_m2,
        light.dhi_w_m2,
        dni_extra=sun.extra_w_m2[:, None, None],
        albedo=albedo_frac,
        model="haydavies",
    )
    return np.maximum(np.asarray(whole["poa_global"], dtype=np.float64), 0.0)
