"""Monthly climates: one given as a table, one from the packaged world grid, fifteen places to start from."""

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from importlib import resources
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike

from server.errors import InputError
from server.physics.sky import (
    MONTHS,
    FloatArray,
    Site,
    monthly_h0_kwh_m2,
    sun_year,
)

HIGHEST_KT = 0.85  # no month anywhere is clearer
COLDEST_AIR_C, HOTTEST_AIR_C = -90.0, 60.0  # just outside the world's records, -89.2 and 56.7 (WMO)
TWILIGHT_KWH_M2 = 0.05  # what refraction and a month's edges may bring where H0 says next to nothing

ROUGH_GRID_SOURCE = (
    "2° world grid, rough: yearly energy ±10 %, single months ±15 %; give measured H or a weather file for design"
)

# 20-year low below the coldest month's mean minimum tn: 15.0 - 0.52 tn (±4.0 K); 20-year high above the warmest month's
# mean maximum: 10.6 ± 3.2 K. Fitted by us to the design extremes in the headers of 25 weather files.
RECORD_LOW_BELOW_K, RECORD_LOW_SLOPE = 15.0, 0.52
RECORD_LOW_SPAN_K = (2.0, 26.0)
RECORD_HIGH_ABOVE_K = 10.6


@dataclass(frozen=True, slots=True, eq=False)
class MonthlyClimate:
    """Twelve months: clearness, mean daily minimum and maximum of the air, and the extremes to design for.

    `source` is a label for the reader, `rough` warns that no measurement of this place stands behind it, and the two
    `assumed` flags that an extreme was estimated (see `monthly_from_kt`).

    Shapes:  `kt`, `air_min_c`, `air_max_c` [12], made read-only.
    Raises:  InputError naming month, value and bound.
    """

    kt: FloatArray
    air_min_c: FloatArray
    air_max_c: FloatArray
    record_low_c: float
    record_high_c: float
    source: str
    rough: bool = False
    record_low_assumed: bool = False
    record_high_assumed: bool = False

    def __post_init__(self) -> None:
        """Refuse a table that no place on Earth has."""
        bounds = {
            "kt": (0.0, HIGHEST_KT, "a monthly clearness index"),
            "air_min_c": (COLDEST_AIR_C, HOTTEST_AIR_C, "an air temperature in °C"),
            "air_max_c": (COLDEST_AIR_C, HOTTEST_AIR_C, "an air temperature in °C"),
        }
        for field, (lowest, highest, what) in bounds.items():
            values = twelve(field, getattr(self, field))
            for month, value in zip(MONTHS, values, strict=True):
                if not lowest <= value <= highest:
                    sentence = f"{month}: {value:g} is not {what}: it must lie between {lowest:g} and {highest:g}"
                    raise InputError(field, sentence)
            values.setflags(write=False)
            object.__setattr__(self, field, values)
        for month, low, high in zip(MONTHS, self.air_min_c, self.air_max_c, strict=True):
            if not low < high:
                raise InputError(
                    "air_max_c", f"{month}: the mean maximum {high:g} °C must lie above the mean minimum {low:g} °C"
                )
        require_records(self.record_low_c, self.record_high_c, self.air_min_c.min(), self.air_max_c.max())


def require_records(record_low_c: float, record_high_c: float, lowest_c: float, highest_c: float) -> None:
    """Nothing, or an InputError: no record low lies above the ordinary lows, no record high below the highs."""
    if not COLDEST_AIR_C <= record_low_c <= lowest_c:
        raise InputError(
            "record_low_c",
            f"{record_low_c:g} °C cannot be the record low: it must lie between {COLDEST_AIR_C:g} and the coldest "
            f"ordinary temperature given, {lowest_c:g}",
        )
    if not highest_c <= record_high_c <= HOTTEST_AIR_C:
        raise InputError(
            "record_high_c",
            f"{record_high_c:g} °C cannot be the record high: it must lie between the warmest ordinary temperature "
            f"given, {highest_c:g}, and {HOTTEST_AIR_C:g}",
        )


def twelve(field: str, values: ArrayLike) -> FloatArray:
    """A fresh array [12]. Raises: InputError unless there are twelve numbers."""
    try:
        array = np.array(values, dtype=np.float64)
    except (TypeError, ValueError):
        raise InputError(field, "not every value is a number: give twelve, January to December") from None
    if array.shape != (12,):
        raise InputError(field, f"{array.size} values are not a year: give twelve, January to December")
    return array


def record_low_default_c(air_min_c: FloatArray) -> float:
    """The 20-year low, from the coldest month's mean daily minimum, ± 4.0 K. Shape [12] in."""
    coldest_c = float(air_min_c.min())
    below_k = min(max(RECORD_LOW_BELOW_K - RECORD_LOW_SLOPE * coldest_c, RECORD_LOW_SPAN_K[0]), RECORD_LOW_SPAN_K[1])
    return max(coldest_c - below_k, COLDEST_AIR_C)


def record_high_default_c(air_max_c: FloatArray) -> float:
    """The 20-year high, from the warmest month's mean daily maximum, ± 3.2 K. Shape [12] in."""
    return min(float(air_max_c.max()) + RECORD_HIGH_ABOVE_K, HOTTEST_AIR_C)


def monthly_from_kt(
    kt: ArrayLike,
    air_min_c: ArrayLike,
    air_max_c: ArrayLike,
    *,
    record_low_c: float | None = None,
    record_high_c: float | None = None,
    source: str = "monthly table",
    rough: bool = False,
) -> MonthlyClimate:
    """A climate from twelve clearness indices and mean daily extremes; records left out are estimated and flagged.

    Shapes:  the first three [12].
    Raises:  InputError, see MonthlyClimate.
    """
    low, high = twelve("air_min_c", air_min_c), twelve("air_max_c", air_max_c)
    return MonthlyClimate(
        kt=twelve("kt", kt),
        air_min_c=low,
        air_max_c=high,
        record_low_c=record_low_default_c(low) if record_low_c is None else record_low_c,
        record_high_c=record_high_default_c(high) if record_high_c is None else record_high_c,
        source=source,
        rough=rough,
        record_low_assumed=record_low_c is None,
        record_high_assumed=record_high_c is None,
    )


def monthly_from_h(
    site: Site,
    h_kwh_m2: ArrayLike,
    air_min_c: ArrayLike,
    air_max_c: ArrayLike,
    *,
    record_low_c: float | None = None,
    record_high_c: float | None = None,
    source: str = "monthly table",
    rough: bool = False,
) -> MonthlyClimate:
    """A climate from twelve daily sums on the horizontal, kWh/m2: clearness is H over H0 at that latitude.

    Shapes:  the tables [12].
    Raises:  InputError for a sum the sky cannot give, with month, value and bound; else as MonthlyClimate.
    """
    h = twelve("h_kwh_m2", h_kwh_m2)
    h0 = monthly_h0_kwh_m2(site.lat_deg)
    highest = np.maximum(HIGHEST_KT * h0, TWILIGHT_KWH_M2)
    for month, value, bound in zip(MONTHS, h, highest, strict=True):
        if not 0.0 <= value <= bound:
            raise InputError(
                "h_kwh_m2",
                f"{month}: {value:g} kWh/m² a day is no sum that the sun can bring at latitude {site.lat_deg:g}: "
                f"it must lie between 0 and {bound:.2f}",
            )
    # A table's edges may pass H0 in a month of twilight; nothing is computed from the excess.
    kt = np.minimum(h / np.maximum(h0, 1e-9), HIGHEST_KT)
    return monthly_from_kt(
        kt,
        air_min_c,
        air_max_c,
        record_low_c=record_low_c,
        record_high_c=record_high_c,
        source=source,
        rough=rough,
    )


# --- the packaged grid ------------------------------------------------------------------------------------------------

LAPSE_K_PER_M = 0.006  # the grid's temperatures were brought to sea level with it
GRID_STEP_DEG = 2.0
TENTHS_PER_K = 10.0
BYTES_PER_LOG = 30.0  # p = 30·ln(1 + mm a month); how that was settled is told in data/README.md


@lru_cache(maxsize=1)
def _grid() -> tuple[FloatArray, FloatArray]:
    """Sea-level temperature, °C, and ln(1 + precipitation in mm), both [12, 91, 180]: 90° N first, 0° E first."""
    with resources.files("server.physics").joinpath("data", "climgrid_2deg.npz").open("rb") as file, np.load(file) as f:
        return f["t"] / TENTHS_PER_K, f["p"] / BYTES_PER_LOG


def _bilinear(grid: FloatArray, site: Site) -> FloatArray:
    """The grid at a site: [12, 91, 180] -> [12]. Longitude closes on itself."""
    north, east = (90.0 - site.lat_deg) / GRID_STEP_DEG, site.wrapped_lon_deg % 360.0 / GRID_STEP_DEG
    row, column = min(int(north), grid.shape[1] - 2), int(east) % grid.shape[2]
    down, right = north - row, east - int(east)
    upper, lower = grid[:, row], grid[:, row + 1]
    following = (column + 1) % grid.shape[2]
    return np.asarray(
        (1.0 - down) * ((1.0 - right) * upper[:, column] + right * upper[:, following])
        + down * ((1.0 - right) * lower[:, column] + right * lower[:, following])
    )


def grid_air_c(site: Site) -> FloatArray:
    """Mean air temperature of each month at the site's altitude. Shape [12]. Against 32 stations: rmse 1.4 K."""
    sea_level_c, _ = _grid()
    return _bilinear(sea_level_c, site) - LAPSE_K_PER_M * site.height_m


def monthly_from_grid(site: Site) -> MonthlyClimate:
    """A rough climate for a bare latitude and longitude: the grid's temperature and rain, and two regressions.

    Clearness falls with rain, in the oceanic storm belts and under a low sun; it never passes the clear day of the
    place, which mends dusty deserts. The daily range follows clearness and the year's range. Fitted by us to 32
    stations and the yearly sums of 27 climate zones; each station left out in turn: Kt rmse 0.058, yearly H +1 ± 8 %
    (worst 18 %), daily range rmse 2.2 K.

    Raises:  InputError if the altitude makes a temperature that no place has.
    """
    _, log_rain = _grid()
    mean_c = grid_air_c(site)
    year_range_k = mean_c.max() - mean_c.min()
    storm_belt = np.exp(-(((abs(site.lat_deg) - 58.0) / 12.0) ** 2)) * np.exp(-year_range_k / 20.0)
    low_sun = np.maximum(0.0, 1.0 - monthly_h0_kwh_m2(site.lat_deg) / 5.0)
    kt = (
        0.750
        - 0.0560 * _bilinear(log_rain, site)
        + 0.0015 * np.clip(mean_c, -40.0, 32.0)
        + 0.0120 * site.height_m / 1000.0
        - 0.182 * storm_belt
        - 0.172 * low_sun
    )
    sun = sun_year(site)
    kt = np.clip(kt, 0.20, 0.75)
    kt = np.where(sun.dark, kt, np.minimum(kt, sun.clear_index))
    range_k = np.clip(-6.1 + 26.4 * kt + 0.137 * year_range_k, 3.0, 20.0)
    return monthly_from_kt(kt, mean_c - range_k / 2.0, mean_c + range_k / 2.0, source=ROUGH_GRID_SOURCE, rough=True)


# --- places to start from ---------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Preset:
    """A place whose monthly table the reader may take and edit: °C, °C, hundredths of clearness."""

    name: str
    site: Site
    from_weather_file: bool
    air_min_c: tuple[int, ...]
    air_max_c: tuple[int, ...]
    kt_percent: tuple[int, ...]


def _preset(
    name: str, lat_deg: float, lon_deg: float, altitude_m: float, low: str, high: str, kt: str, *, file: bool = True
) -> Preset:
    """A preset from its three printed rows."""
    rows = (tuple(int(word) for word in row.split()) for row in (low, high, kt))
    return Preset(name, Site(lat_deg, lon_deg, altitude_m), file, *rows)


# Latitude, altitude and tables: typical-year weather files, whose months are real single months, so neighbours may
# jump; where file=False, our own grid regressions. Longitudes: ordinary geographic knowledge, to about 0.1°.
# fmt: off
PRESETS: Mapping[str, Preset] = MappingProxyType({
    "singapore": _preset("Singapore", 1.4, 104.0, 16,
        "24 25 25 25 26 26 25 25 25 25 25 24", "30 31 32 32 31 31 31 31 30 31 30 29",
        "46 49 46 49 48 47 49 45 44 44 43 42"),
    "darwin": _preset("Darwin", -12.4, 130.9, 31,
        "25 24 24 24 21 19 18 18 21 23 25 25", "31 31 32 32 32 31 31 32 33 34 33 32",
        "46 47 48 54 61 68 72 72 66 60 53 48", file=False),
    "antananarivo": _preset("Antananarivo", -18.8, 47.5, 1276,
        "17 17 17 16 14 11 10 10 12 14 16 16", "26 26 26 24 23 21 20 20 23 25 27 26",
        "49 44 50 52 52 51 55 56 59 59 58 49"),
    "bogota": _preset("Bogotá", 4.7, -74.1, 2548,
        "7 8 9 8 9 9 8 8 7 7 9 6", "20 20 19 19 20 18 18 18 20 19 19 20",
        "50 50 45 41 43 42 45 45 42 42 42 50"),
    "el_alto": _preset("El Alto", -16.5, -68.2, 4061,
        "3 3 3 2 0 -1 -2 -1 1 3 4 4", "11 11 11 11 10 9 9 10 11 12 12 12",
        "50 50 52 55 58 60 59 59 57 55 54 51", file=False),
    "tucson": _preset("Tucson", 32.2, -110.9, 809,
        "8 8 8 14 17 22 24 23 21 14 9 5", "23 18 23 31 34 39 37 37 35 28 22 20",
        "68 53 57 73 72 73 60 60 57 64 63 64"),
    "delhi": _preset("Delhi", 28.6, 77.2, 216,
        "7 11 17 23 26 27 26 25 24 19 13 8", "20 24 29 36 39 38 36 35 34 32 27 22",
        "59 59 61 64 62 55 50 50 53 62 67 65", file=False),
    "miami": _preset("Miami", 25.8, -80.3, 2,
        "16 17 18 21 23 25 25 25 24 22 20 17", "24 24 25 28 29 31 31 31 30 28 26 24",
        "53 57 57 60 55 51 54 54 52 54 52 54"),
    "seville": _preset("Seville", 37.4, -5.9, 31,
        "7 7 10 12 15 21 22 22 19 17 11 8", "17 18 19 24 29 36 37 37 34 29 20 16",
        "54 60 57 62 67 68 73 71 69 63 61 49"),
    "sydney": _preset("Sydney", -34.0, 151.2, 3,
        "19 20 18 14 12 10 8 8 11 13 16 18", "26 26 25 23 19 17 17 19 20 23 23 25",
        "55 52 54 53 50 48 52 57 56 55 52 52"),
    "golden": _preset("Golden, Colorado", 39.7, -105.2, 1829,
        "-5 -7 -4 3 6 12 14 15 11 3 -3 -6", "7 5 10 14 20 27 28 29 24 17 9 9",
        "54 54 62 59 56 54 55 58 60 56 63 44"),
    "london": _preset("London", 51.1, -0.2, 62,
        "2 0 4 4 7 10 12 12 10 6 4 2", "7 7 10 12 17 20 22 21 18 15 11 8",
        "30 32 35 42 46 43 46 47 43 39 36 28"),
    "chicago": _preset("Chicago", 42.0, -87.9, 201,
        "-10 -7 -1 5 9 15 19 17 13 5 1 -8", "0 2 9 15 22 27 29 27 24 16 8 0",
        "45 47 47 47 55 54 55 52 52 50 43 43"),
    "helsinki": _preset("Helsinki", 60.3, 25.0, 56,
        "-8 -9 -3 0 4 10 11 11 6 3 -3 -5", "-1 -3 1 8 14 18 21 20 14 9 0 -1",
        "27 40 40 47 52 51 51 47 42 38 26 20"),
    "northway": _preset("Northway, Alaska", 63.0, -141.9, 522,
        "-29 -25 -20 -14 1 6 10 4 -2 -7 -24 -27", "-20 -15 -4 1 14 18 22 18 8 0 -16 -19",
        "40 41 46 49 47 51 34 41 42 36 42 36"),
})
# fmt: on


def preset(slug: str) -> Preset:
    """The preset of that name. Raises: InputError with the names there are."""
    if slug not in PRESETS:
        raise InputError("preset", f"{slug!r} is not a preset: choose one of {', '.join(sorted(PRESETS))}")
    return PRESETS[slug]


def monthly_from_preset(slug: str) -> MonthlyClimate:
    """The monthly climate of a preset place; its site is `preset(slug).site`. Raises: InputError with the names."""
    place = preset(slug)
    origin = "typical-year weather file" if place.from_weather_file else "2° world grid, rough"
    return monthly_from_kt(
        np.array(place.kt_percent) / 100.0,
        place.air_min_c,
        place.air_max_c,
        source=f"{place.name}, preset ({origin})",
        rough=not place.from_weather_file,
    )
