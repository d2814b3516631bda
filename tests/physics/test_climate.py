"""Sun, light, temperature and monthly climates.

"Trial" beside a figure: computed beforehand by a separate program (pvlib 0.16.1) when the method was tried on 32 real
weather files, with the tolerance stated there. The rest is print, hand arithmetic or law.
"""

import math
from types import MappingProxyType

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from server.errors import InputError
from server.physics.climate import (
    CLEAR,
    DARK,
    DAY_KINDS,
    DULL,
    PRESETS,
    Plane,
    Site,
    altitude_default_m,
    daily_air_c,
    default_plane,
    monthly_from_grid,
    monthly_from_h,
    monthly_from_kt,
    monthly_from_preset,
    preset,
    sine_decay_air_c,
    stated_day,
    three_day_year,
)
from server.physics.presets import grid_air_c
from server.physics.sky import (
    MONTH_DAYS,
    clear_day_cap,
    daily_diffuse_frac,
    day_length_h,
    highest_kt,
    hollands_huget_kt,
    monthly_h0_kwh_m2,
    on_plane_w_m2,
    representative_days,
    sun_year,
    tercile_kt,
    three_days_of_light,
)

JANUARY, MARCH, JUNE, JULY, DECEMBER = 0, 2, 5, 6, 11
FLAT = Plane(0.0, 180.0)
MILD = MappingProxyType({"air_min_c": [10.0] * 12, "air_max_c": [20.0] * 12})


def light_of(site, kt, *, turbidity=None, step_minutes=15):
    sun = sun_year(site, step_minutes, turbidity)
    return sun, three_days_of_light(sun, np.full(12, kt))


def plane_of(site, kt, tilt_deg, azimuth_deg, **options):
    """Light on a plane [12, 3, S], W/m2, and the days' sums [12, 3], kWh/m2."""
    sun, light = light_of(site, kt, **options)
    poa_w_m2 = on_plane_w_m2(sun, light, tilt_deg, azimuth_deg, 0.2)
    return poa_w_m2, poa_w_m2.sum(axis=-1) * sun.step_h / 1000.0


def year_kwh_m2(days):
    return float(np.sum(days.poa_w_m2 * days.step_h * days.weight_days)) / 1000.0


# --- outside the atmosphere -------------------------------------------------------------------------------------------

# Trial, kWh/m2 a day with 1361 W/m2, tolerance 0.5 %; 70° N as printed to three places.
H0_36 = [4.880, 6.217, 8.059, 9.846, 11.039, 11.503, 11.245, 10.259, 8.649, 6.748, 5.169, 4.466]
H0_0 = [10.018, 10.340, 10.461, 10.159, 9.613, 9.265, 9.390, 9.872, 10.284, 10.314, 10.049, 9.865]
H0_S34 = [11.933, 10.841, 9.075, 6.998, 5.317, 4.541, 4.877, 6.254, 8.229, 10.194, 11.610, 12.214]
H0_70 = [0.018, 0.742, 3.006, 6.398, 9.770, 11.653, 10.708, 7.607, 4.106, 1.343, 0.096, 0.000]


@pytest.mark.parametrize(("lat_deg", "trial"), [(36.1, H0_36), (0.0, H0_0), (-33.95, H0_S34)])
def test_monthly_h0(lat_deg, trial):
    assert monthly_h0_kwh_m2(lat_deg) == pytest.approx(trial, rel=0.005)


def test_monthly_h0_beyond_the_polar_circle():
    assert monthly_h0_kwh_m2(70.0) == pytest.approx(H0_70, abs=0.001)
    assert monthly_h0_kwh_m2(-75.0)[DECEMBER] == pytest.approx(12.77, rel=0.005)  # trial


def test_representative_day_of_the_check_cases():
    assert representative_days(36.1)[JUNE] == 161  # trial, cases A and B
    assert representative_days(-33.95)[JUNE] == 162


def test_representative_days_stand_near_klein_s_table():
    # Klein, Solar Energy 19 (1977), from memory: day of the year for each month. June and December are left out: H0
    # turns round at the solstice, so two days of the month lie equally near the mean.
    klein = np.array([17, 47, 75, 105, 135, 162, 198, 228, 258, 288, 318, 344])
    ours = representative_days(40.0)
    assert np.all(np.abs(np.delete(ours - klein, [JUNE, DECEMBER])) <= 2)


# --- three days -------------------------------------------------------------------------------------------------------

# Trial, kt, kt_max -> k of the three days; the row 0.40 in 0.10..0.70 is a uniform spread: 0.2, 0.4, 0.6 by hand.
TERCILES = [
    (0.30, 0.65, [0.1485, 0.2721, 0.4794]),
    (0.40, 0.70, [0.2, 0.4, 0.6]),
    (0.50, 0.72, [0.2998, 0.5326, 0.6676]),
    (0.60, 0.75, [0.4422, 0.6378, 0.7200]),
    (0.70, 0.79, [0.6014, 0.7257, 0.7729]),
]


@pytest.mark.parametrize(("kt", "kt_max", "trial"), TERCILES)
def test_terciles(kt, kt_max, trial):
    assert tercile_kt(kt, kt_max) == pytest.approx(trial, abs=1e-4)


@given(kt=st.floats(0.0, 0.85), above=st.floats(0.02, 0.6))
@settings(max_examples=200, deadline=None)
def test_terciles_rise_and_keep_the_mean(kt, above):
    k = tercile_kt(kt, kt + above)
    assert np.all(np.isfinite(k))
    assert k.mean() == pytest.approx(kt, abs=1e-12)
    assert np.all(np.diff(k) > 0.0) or kt < 1e-6
    assert k[0] >= -1e-12
    assert k[2] <= (kt + above) * (1.0 + 0.01)  # the scaling to the exact mean may lift it by a trace


@pytest.mark.parametrize(("kt", "kt_max"), [(0.25, 0.70), (0.399999, 0.70), (0.45, 0.70), (0.66, 0.75)])
def test_terciles_agree_with_plain_numerical_integration(kt, kt_max):
    # Law: the density exp(g·k) on [0.10, kt_max] with mean kt, cut into thirds of its own weight.
    k = np.linspace(0.10, kt_max, 400_001)
    low, high = -400.0, 400.0
    for _ in range(80):
        g = 0.5 * (low + high)
        weight = np.exp(g * (k - (kt_max if g > 0 else 0.10)))
        low, high = (g, high) if np.average(k, weights=weight) < kt else (low, g)
    share = np.cumsum(weight) / weight.sum()
    thirds = [np.average(k[part], weights=weight[part]) for part in (share < 1 / 3, abs(share - 0.5) <= 1 / 6)]
    assert tercile_kt(kt, kt_max)[:2] == pytest.approx(thirds, abs=2e-5)


def test_hollands_and_huget_clearest_day():
    # Trial, from the formula of Hollands & Huget 1983, printed to four places.
    assert hollands_huget_kt([0.3, 0.5, 0.7]) == pytest.approx([0.6914, 0.7646, 0.8182], abs=6e-5)


def test_clearest_day_stays_by_the_clear_day_of_the_place():
    kt, clear = np.meshgrid(np.linspace(0.0, 0.6, 13), np.linspace(0.3, 0.8, 6))
    top = highest_kt(kt, clear)
    free = top > kt + 0.02 + 1e-12
    assert np.all(top[free] >= clear[free] - 1e-12)
    assert np.all(top[free] <= 1.15 * clear[free] + 1e-12)
    assert np.all(top >= kt + 0.02 - 1e-12)


def test_daily_diffuse_share_by_season():
    # Trial, from the daily correlation of Erbs, Klein & Duffie 1982, printed to four places.
    k = [0.2, 0.4, 0.6, 0.75]
    assert daily_diffuse_frac(k, np.radians(75.0)) == pytest.approx([0.9628, 0.7583, 0.3534, 0.143], abs=6e-5)
    assert daily_diffuse_frac(k, np.radians(95.0)) == pytest.approx([0.9612, 0.7584, 0.4323, 0.175], abs=6e-5)


def test_case_a_greensboro_june():
    # Trial, 36.1 N 79.95 W, 273 m, June, Kt 0.535, Linke turbidity 4.0, tilt 30 south. Tolerance 1 %.
    site = Site(36.1, -79.95, 273.0)
    clear_index = sun_year(site, 15, 4.0).clear_index[JUNE]
    assert clear_index == pytest.approx(0.6915, rel=0.01)
    assert tercile_kt(0.535, highest_kt(0.535, clear_index)) == pytest.approx([0.3174, 0.5705, 0.7171], rel=0.01)
    poa_w_m2, sums = plane_of(site, 0.535, 30.0, 180.0, turbidity=4.0)
    june = poa_w_m2[JUNE]
    assert sums[JUNE] == pytest.approx([3.461, 6.097, 7.502], rel=0.01)
    assert sums[JUNE].mean() == pytest.approx(5.687, rel=0.01)
    assert june.max(axis=1) == pytest.approx([422.0, 776.0, 987.0], rel=0.01)
    assert np.sum(june**2) / np.sum(june) == pytest.approx(614.0, rel=0.01)


def test_case_b_sydney_june():
    # Trial, 33.95 S 151.18 E, 3 m, June, Kt 0.5, turbidity 2.6, tilt 34 north. Tolerance 1 %.
    site = Site(-33.95, 151.18, 3.0)
    clear_index = sun_year(site, 15, 2.6).clear_index[JUNE]
    assert tercile_kt(0.5, highest_kt(0.5, clear_index)) == pytest.approx([0.2770, 0.5272, 0.6958], rel=0.01)
    _, sums = plane_of(site, 0.5, 34.0, 0.0, turbidity=2.6)
    assert sums[JUNE] == pytest.approx([1.317, 3.584, 5.701], rel=0.01)
    assert sums[JUNE].mean() == pytest.approx(3.534, rel=0.01)


def test_case_c_a_flat_plane_collects_kt_times_h0():
    _, sums = plane_of(Site(0.0, 0.0, 0.0), 0.5, 0.0, 180.0)
    assert sums[MARCH].mean() == pytest.approx(5.2307, abs=5e-5)  # trial
    assert sums[MARCH].mean() == pytest.approx(0.5 * monthly_h0_kwh_m2(0.0)[MARCH], abs=1e-9)


def test_step_length_hardly_matters():
    # Trial, 45 N December, tilt 60, Kt 0.4, turbidity 3, altitude not recorded: 2.2248 2.2246 2.2243 2.2229 2.2269 for
    # steps of 1, 5, 15, 30, 60 min, a spread of 0.2 %. 1 % for the altitude, which is worth 0.4 % per 200 m.
    trial = {1: 2.2248, 5: 2.2246, 15: 2.2243, 30: 2.2229, 60: 2.2269}
    ours = {
        step: plane_of(Site(45.0, 0.0, 0.0), 0.4, 60.0, 180.0, turbidity=3.0, step_minutes=step)[1][DECEMBER].mean()
        for step in trial
    }
    assert max(ours.values()) / min(ours.values()) < 1.002
    assert ours == pytest.approx(trial, rel=0.01)


def test_low_sun_is_an_even_sky_by_hand():
    # Without a beam the plane sees (1 + cos)/2 of the sky and (1 - cos)/2 of the ground.
    sun, light = light_of(Site(50.0, 10.0, 100.0), 0.4)
    poa_w_m2 = on_plane_w_m2(sun, light, 60.0, 180.0, 0.2)
    low = np.broadcast_to((sun.zenith_deg >= 87.5)[:, None, :], poa_w_m2.shape) & (light.ghi_w_m2 > 0.0)
    assert low.any()
    assert np.all(light.dni_w_m2[low] == 0.0)
    by_hand = light.ghi_w_m2[low] * (0.75 + 0.2 * 0.25)
    assert poa_w_m2[low] == pytest.approx(by_hand, rel=1e-9)


SCAN_LATS = [-90.0, -75.0, -66.5, -34.0, -0.001, 0.0, 12.0, 45.0, 66.6, 70.0, 80.0, 90.0]


@pytest.mark.parametrize("lat_deg", SCAN_LATS)
def test_anywhere_light_is_finite_and_horizontal_energy_closes(lat_deg):
    for lon_deg in (-180.0, 0.0, 180.0):
        for kt in (0.05, 0.3, 0.55, 0.8):
            sun, light = light_of(Site(lat_deg, lon_deg, 0.0), kt)
            ghi = light.ghi_w_m2
            wanted = np.where(sun.dark, 0.0, kt * sun.h0_kwh_m2)
            assert ghi.sum(axis=-1).mean(axis=-1) * sun.step_h / 1000.0 == pytest.approx(wanted, rel=1e-12, abs=1e-15)
            beam = light.dni_w_m2 * np.maximum(np.cos(np.radians(sun.zenith_deg)), 0.0)[:, None, :]
            assert light.dhi_w_m2 + beam == pytest.approx(ghi, rel=1e-12, abs=1e-9)
            assert light.dhi_w_m2.min() >= 0.0
            assert np.all(light.dni_w_m2 <= 1.15 * sun.clear_dni_w_m2[:, None, :])
            for tilt_deg, azimuth_deg in ((0.0, 180.0), (45.0, 90.0), (90.0, 180.0)):
                poa_w_m2 = on_plane_w_m2(sun, light, tilt_deg, azimuth_deg, 0.2)
                assert np.all(np.isfinite(poa_w_m2))
                assert poa_w_m2.min() >= 0.0
                assert poa_w_m2.max() < 1600.0
                if tilt_deg == 0.0:
                    assert poa_w_m2 == pytest.approx(ghi, rel=1e-9, abs=1e-9)


def test_the_two_names_of_one_meridian_agree():
    east, west = Site(20.0, 180.0, 0.0), Site(20.0, -180.0, 0.0)
    assert np.array_equal(plane_of(east, 0.5, 30.0, 180.0)[0], plane_of(west, 0.5, 30.0, 180.0)[0])
    assert np.array_equal(monthly_from_grid(east).kt, monthly_from_grid(west).kt)
    assert Site(20.0, 359.0, 0.0).wrapped_lon_deg == pytest.approx(-1.0)
    assert Site(20.0, -1e-17, 0.0).wrapped_lon_deg == pytest.approx(0.0)
    assert Site(20.0, 180.0, 0.0).wrapped_lon_deg == -180.0


@pytest.mark.parametrize("lon_deg", [-179.0, -112.0, -33.0, 0.0, 77.0, 151.2])
def test_noon_is_noon_at_every_longitude(lon_deg):
    # The equation of time keeps the sun within 17 min of mean solar noon; half a step of 5 min on top.
    sun = sun_year(Site(40.0, lon_deg, 0.0), 5)
    noon_h = sun.solar_hour[np.argmin(sun.zenith_deg, axis=1)]
    assert np.all(np.abs(noon_h - 12.0) <= (17.0 + 2.5) / 60.0)
    # Late in February (sun 13 to 14 min late), early in November (16 min early).
    assert noon_h[1] > 12.0 + 10.0 / 60.0
    assert noon_h[10] < 12.0 - 10.0 / 60.0


def test_hemispheres_mirror():
    # Trial: 3.32 against 3.10 kWh/m2, ratio 1.07 = the Earth's distance from the sun in January and July. 1 %.
    north = plane_of(Site(40.0, 0.0, 0.0), 0.5, 30.0, 180.0, turbidity=3.0)[1][JANUARY].mean()
    south = plane_of(Site(-40.0, 0.0, 0.0), 0.5, 30.0, 0.0, turbidity=3.0)[1][JULY].mean()
    assert north == pytest.approx(3.32, rel=0.01)
    assert south == pytest.approx(3.10, rel=0.01)
    assert north / south == pytest.approx(1.07, abs=0.01)


def test_east_and_west_agree_at_the_equator():
    east = plane_of(Site(0.0, 0.0, 0.0), 0.5, 30.0, 90.0)[1].mean()
    west = plane_of(Site(0.0, 0.0, 0.0), 0.5, 30.0, 270.0)[1].mean()
    assert east == pytest.approx(west, rel=0.001)


def test_the_clear_day_is_capped_with_altitude():
    # Trial: without the cap pvlib's clear sky gives 0.957 of H0 at 4061 m; FAO-56 allows 0.831. The clear June day
    # then peaks at 844 W/m2 (clearness not recorded: 3 %).
    site = preset("el_alto").site
    sun = sun_year(site)
    uncapped = sun.clear_ghi_w_m2.sum(axis=1) * sun.step_h / 1000.0 / sun.h0_kwh_m2
    assert uncapped.max() == pytest.approx(0.957, rel=0.01)
    assert clear_day_cap(4061.0) == pytest.approx(0.831, abs=0.0005)
    assert sun.clear_index.max() <= clear_day_cap(4061.0)
    light = three_days_of_light(sun, monthly_from_preset("el_alto").kt)
    assert light.ghi_w_m2[JUNE, CLEAR].max() == pytest.approx(844.0, rel=0.03)


def test_a_given_turbidity_takes_the_place_of_the_map():
    site = Site(36.1, -79.95, 273.0)
    hazy, clean = (sun_year(site, 15, turbidity).clear_index for turbidity in (6.0, 2.0))
    assert np.all(hazy < clean)


# --- air temperature --------------------------------------------------------------------------------------------------


def test_parton_and_logan_check_day():
    # Trial, 36.1° N, day 198, minimum 20, maximum 31 °C; printed to 0.01 K.
    day_h = day_length_h(36.1, 198)
    assert day_h == pytest.approx(14.189, abs=0.001)
    assert 12.0 - day_h / 2.0 == pytest.approx(4.906, abs=0.001)
    hours = [0.0, 3.0, 6.0, 9.0, 12.0, 15.0, 18.0, 19.0943, 21.0]
    trial_c = [22.14, 21.09, 22.42, 27.48, 30.52, 30.71, 28.00, 26.42, 24.18]
    assert daily_air_c(hours, day_h, 20.0, 31.0) == pytest.approx(trial_c, abs=0.01)
    minutes = np.arange(1440) / 60.0
    day_c = sine_decay_air_c(minutes, day_h, 20.0, 31.0)
    night = np.abs(minutes - 12.0) > day_h / 2.0
    assert day_c.max() == pytest.approx(31.0, abs=0.01)
    assert minutes[day_c.argmax()] == pytest.approx(13.68, abs=0.02)
    assert day_c.mean() == pytest.approx(25.79, abs=0.01)
    assert day_c[night].mean() == pytest.approx(22.58, abs=0.01)


@pytest.mark.parametrize("day_h", [0.0, 0.99, 23.01, 24.0])
def test_without_sunset_the_air_follows_one_wave_with_its_peak_at_15_h(day_h):
    assert daily_air_c([3.0, 9.0, 15.0, 21.0], day_h, -10.0, -4.0) == pytest.approx([-10.0, -7.0, -4.0, -7.0])


@given(day_h=st.floats(0.0, 24.0), low_c=st.floats(-60.0, 40.0), span_k=st.floats(0.1, 25.0))
@settings(max_examples=100, deadline=None)
def test_air_stays_between_its_extremes(day_h, low_c, span_k):
    air_c = daily_air_c(np.arange(0.0, 24.0, 0.1), day_h, low_c, low_c + span_k)
    assert np.all(air_c >= low_c - 1e-9)
    assert np.all(air_c <= low_c + span_k + 1e-9)


# --- the year of three-day months -------------------------------------------------------------------------------------


def test_a_year_has_its_shapes_and_its_weights():
    site = preset("seville").site
    days = three_day_year(site, monthly_from_preset("seville"), default_plane(site.lat_deg))
    assert days.poa_w_m2.shape == (12 * 3 * 96,)
    assert days.steps_per_day == 96
    for name in ("month", "day_kind", "solar_hour", "air_c", "cell_c", "weight_days", "day_length_h"):
        assert getattr(days, name).shape == days.poa_w_m2.shape
    assert days.by_day(days.weight_days)[:, 0].sum() == pytest.approx(365.0, abs=1e-9)
    assert days.by_day(days.weight_days).shape == (36, 96)
    assert np.array_equal(days.by_day(days.month)[:, 0], np.repeat(np.arange(12), 3))
    assert days.by_day(days.solar_hour)[0, [0, -1]] == pytest.approx([0.125, 23.875])
    assert DAY_KINDS == ("dull", "middle", "clear", "dark")


def test_a_flat_year_brings_exactly_the_table():
    site = preset("london").site
    monthly = monthly_from_preset("london")
    table = np.sum(monthly.kt * monthly_h0_kwh_m2(site.lat_deg) * MONTH_DAYS)
    assert year_kwh_m2(three_day_year(site, monthly, FLAT)) == pytest.approx(table, rel=1e-12)
    assert year_kwh_m2(three_day_year(site, monthly, FLAT, step_minutes=5)) == pytest.approx(table, rel=1e-12)


def test_dark_days_take_their_share_of_the_light():
    site, monthly, plane = preset("helsinki").site, monthly_from_preset("helsinki"), FLAT
    lost = np.zeros(12)
    lost[JANUARY], lost[JUNE] = 31, 3
    whole, part = three_day_year(site, monthly, plane), three_day_year(site, monthly, plane, 15, lost)
    assert part.poa_w_m2.shape == (12 * 4 * 96,)
    assert part.by_day(part.weight_days)[:, 0].sum() == pytest.approx(365.0, abs=1e-9)
    dark = part.day_kind == DARK
    assert np.all(part.poa_w_m2[dark] == 0.0)
    assert np.array_equal(part.cell_c[dark], part.air_c[dark])
    assert part.by_day(part.weight_days)[:4, 0] == pytest.approx([0.0, 0.0, 0.0, 31.0])
    h_kwh_m2 = monthly.kt * monthly_h0_kwh_m2(site.lat_deg)
    assert year_kwh_m2(whole) - year_kwh_m2(part) == pytest.approx(np.sum(lost * h_kwh_m2), rel=1e-9)
    every = three_day_year(site, monthly, plane, 15, 2)
    assert every.weight_days[every.day_kind == DARK] == pytest.approx(2.0)


def test_the_module_is_colder_than_the_air_by_night_and_hotter_by_day():
    site = preset("sydney").site
    days = three_day_year(site, monthly_from_preset("sydney"), default_plane(site.lat_deg))
    night = days.poa_w_m2 == 0.0
    rise_k = days.cell_c - days.air_c
    for kind, cooling_k in enumerate((1.0, 1.5, 2.0)):  # -1 K overcast, -2 K clear
        assert rise_k[night & (days.day_kind == kind)] == pytest.approx(-cooling_k)
    assert rise_k[~night] == pytest.approx(days.poa_w_m2[~night] / (25.0 + 6.84))  # Faiman at 1 m/s


def test_clear_days_have_the_wider_swing_and_the_same_mean_of_extremes():
    site, monthly = preset("tucson").site, monthly_from_preset("tucson")
    days = three_day_year(site, monthly, FLAT, 5)
    air_c = days.by_day(days.air_c).reshape(12, 3, -1)
    swing_k = np.ptp(air_c, axis=-1) / (monthly.air_max_c - monthly.air_min_c)[:, None]
    # The curve turns back before it reaches the minimum of the next morning: about a tenth of the evening's fall.
    assert np.all(np.diff(swing_k, axis=1) > 0.0)
    assert swing_k[:, 2] / swing_k[:, 0] == pytest.approx(np.full(12, 1.19 / 0.79), rel=1e-9)
    assert air_c[:, 1].max(axis=-1) == pytest.approx(
        (monthly.air_min_c + monthly.air_max_c) / 2 + 1.02 * (monthly.air_max_c - monthly.air_min_c) / 2, abs=0.01
    )


def test_polar_night_is_dark_and_midnight_sun_is_not():
    north = monthly_from_kt([0.4] * 12, [-30.0] * 12, [-20.0] * 12)
    days = three_day_year(Site(80.0, 15.0, 0.0), north, default_plane(80.0))
    december = days.month == DECEMBER
    assert np.all(days.poa_w_m2[december] == 0.0)
    assert np.all(days.day_length_h[december] == 0.0)
    assert np.all(days.cell_c[december] < days.air_c[december])
    # Trial: 75° S in December the sun gives more than 20 W/m2 at every hour.
    _, light = light_of(Site(-75.0, 0.0, 0.0), 0.6)
    assert light.ghi_w_m2[DECEMBER, 1:].min() > 20.0
    days = three_day_year(Site(-75.0, 0.0, 0.0), north, FLAT)
    assert np.all(days.day_length_h[days.month == DECEMBER] == 24.0)
    # 70° N: the month of the polar sunrise has a little light and the dark month none.
    sun, light = light_of(Site(70.0, 20.0, 0.0), 0.4)
    assert list(np.flatnonzero(sun.dark)) == [DECEMBER]
    assert light.ghi_w_m2[JANUARY].sum() > 0.0


def test_a_year_carries_the_records_and_the_label():
    site, monthly = preset("chicago").site, monthly_from_preset("chicago")
    days = three_day_year(site, monthly, FLAT)
    assert (days.record_low_c, days.record_high_c) == (monthly.record_low_c, monthly.record_high_c)
    assert days.record_low_assumed
    assert days.record_high_assumed
    assert days.source == monthly.source


def test_a_default_plane_faces_the_equator():
    assert (default_plane(45.0).tilt_deg, default_plane(45.0).azimuth_deg) == (45.0, 180.0)
    assert (default_plane(-34.0).tilt_deg, default_plane(-34.0).azimuth_deg) == (34.0, 0.0)
    assert default_plane(0.0).tilt_deg == 10.0
    assert default_plane(-90.0).tilt_deg == 60.0


@pytest.mark.parametrize(("mounting", "printed_k"), [("open_rack", 31.4), ("roof_gap", 49.5), ("flat_insulated", 57.5)])
def test_mountings_rise_in_full_sun(mounting, printed_k):
    # Trial: rise at 1000 W/m2 and 1 m/s, from Faiman 2008 and King et al. 2004, to 0.1 K.
    assert Plane(0.0, 180.0, mounting=mounting).cell_c(1000.0, 20.0) - 20.0 == pytest.approx(printed_k, abs=0.06)


# --- monthly climates -------------------------------------------------------------------------------------------------


def test_default_records_by_hand():
    # Coldest mean minimum -10: g = 15.0 + 5.2 = 20.2; warmest mean maximum 29 + 10.6.
    chicago = monthly_from_preset("chicago")
    assert chicago.record_low_c == pytest.approx(-30.2)
    assert chicago.record_high_c == pytest.approx(39.6)
    # -29: g = 15.0 + 15.08 is held at 26; 25: g = 15.0 - 13.0 = 2.0, and never less.
    assert monthly_from_preset("northway").record_low_c == pytest.approx(-55.0)
    warm = monthly_from_kt([0.5] * 12, [28.0] * 12, [33.0] * 12)
    assert warm.record_low_c == pytest.approx(26.0)
    given_one = monthly_from_kt([0.5] * 12, **MILD, record_low_c=-3.0)
    assert (given_one.record_low_c, given_one.record_low_assumed) == (-3.0, False)
    assert given_one.record_high_assumed


def test_h_and_kt_say_the_same():
    site = Site(51.1, -0.2, 62.0)
    kt = np.linspace(0.3, 0.5, 12)
    h_kwh_m2 = kt * monthly_h0_kwh_m2(51.1)
    assert monthly_from_h(site, h_kwh_m2, **MILD).kt == pytest.approx(kt, rel=1e-12)


def test_h_of_a_polar_night_is_no_division_by_zero():
    h_kwh_m2 = 0.5 * monthly_h0_kwh_m2(80.0)
    monthly = monthly_from_h(Site(80.0, 15.0, 0.0), h_kwh_m2, **MILD)
    assert np.all(np.isfinite(monthly.kt))


def test_tables_are_read_only():
    with pytest.raises(ValueError, match="read-only"):
        monthly_from_preset("miami").kt[0] = 0.1


# Trial: mean temperature read from the grid, °C, to one place.
GRID_TEMPERATURES = [
    (Site(1.35, 103.99, 5.0), JANUARY, 26.3),
    (Site(30.12, 31.40, 75.0), JULY, 29.2),
    (Site(62.02, 129.72, 100.0), JANUARY, -37.0),
    (Site(-16.51, -68.19, 4061.0), JULY, 3.5),
]


@pytest.mark.parametrize(("site", "month", "trial_c"), GRID_TEMPERATURES)
def test_grid_temperatures(site, month, trial_c):
    assert grid_air_c(site)[month] == pytest.approx(trial_c, abs=0.06)


# Yearly sum on the horizontal, kWh/m2. Trial: computed from the same grid by the program that made it, 0.6 % (0.2 % but
# for Cairo, held by the clear day). Remembered: public solar atlases, from memory; the chain is stated as worst 18 %.
CITIES = [
    ("Singapore", Site(1.35, 103.99, 5.0), 1792, 1630),
    ("Cairo", Site(30.12, 31.40, 75.0), 2003, 2040),
    ("El Alto", Site(-16.51, -68.19, 4061.0), 1913, 2090),
    ("Yakutsk", Site(62.02, 129.72, 100.0), 1070, 1130),
    ("Reykjavik", Site(64.13, -21.94, 50.0), 763, 780),
    ("Nairobi", Site(-1.3, 36.8, 1670.0), 2081, 1930),
    ("Phoenix", Site(33.43, -112.0, 337.0), 1915, 2100),
    ("Sydney", Site(-33.95, 151.18, 3.0), 1654, 1660),
]


@pytest.mark.parametrize(("city", "site", "trial", "remembered"), CITIES)
def test_grid_yearly_sums(city, site, trial, remembered):
    monthly = monthly_from_grid(site)
    yearly = np.sum(monthly.kt * monthly_h0_kwh_m2(site.lat_deg) * MONTH_DAYS)
    assert yearly == pytest.approx(trial, rel=0.006), city
    assert yearly == pytest.approx(remembered, rel=0.18), city


def test_grid_is_finite_and_within_its_stated_range_everywhere():
    # Trial, scan of 1500 random points: minima above -73, maxima below 47, Kt 0.20 to 0.75 (less under a low sun).
    rng = np.random.default_rng(20)
    for lat, lon in [
        (90.0, 0.0),
        (-90.0, 0.0),
        *zip(rng.uniform(-90, 90, 30), rng.uniform(-180, 180, 30), strict=True),
    ]:
        monthly = monthly_from_grid(Site(float(lat), float(lon)))
        assert monthly.rough
        assert monthly.air_min_c.min() >= -73.0
        assert monthly.air_max_c.max() <= 47.0
        assert monthly.kt.max() <= 0.75
        assert monthly.kt.min() > 0.0
        assert np.all(np.isfinite([monthly.record_low_c, monthly.record_high_c]))


@pytest.mark.parametrize("slug", PRESETS)
def test_presets_run_and_know_where_they_come_from(slug):
    place, monthly = preset(slug), monthly_from_preset(slug)
    days = three_day_year(place.site, monthly, default_plane(place.site.lat_deg))
    assert np.all(np.isfinite(days.cell_c))
    assert monthly.source.startswith(place.name)
    assert monthly.rough is not place.from_weather_file


@pytest.mark.parametrize("slug", PRESETS)
def test_preset_longitudes_are_right_by_their_neighbours_temperature(slug):
    # A longitude with a wrong sign or swapped digits lands in another climate. The chain is stated as rmse 1.6 K
    # (minimum) and 1.9 K (maximum). The year's mean within 4 K: Northway's cold valley is 3.5 K below its 2° box.
    place, monthly = preset(slug), monthly_from_preset(slug)
    assert grid_air_c(place.site).mean() == pytest.approx((monthly.air_min_c + monthly.air_max_c).mean() / 2, abs=4.0)


def test_altitude_default():
    assert altitude_default_m(0.0, -30.0) == 0.0  # mid-Atlantic
    assert altitude_default_m(0.0, 330.0) == 0.0
    # The Dead Sea lies at -422 m by the trial's reading of the table, whose steps are 28 m.
    assert altitude_default_m(31.526, 35.449) == pytest.approx(-422.0, abs=28.0)
    assert Site(40.0, -105.0).height_m == altitude_default_m(40.0, -105.0)
    assert Site(40.0, -105.0, 12.0).height_m == 12.0


# --- the stated day ---------------------------------------------------------------------------------------------------


@given(
    daylight_h=st.floats(0.5, 24.0),
    share=st.floats(0.0, 0.999),
    step_minutes=st.sampled_from([1, 5, 15, 30, 60]),
)
@settings(max_examples=100, deadline=None)
def test_a_stated_day_brings_exactly_its_peak_sun_hours(daylight_h, share, step_minutes):
    peak_sun_h = share * 1.4 * 2.0 / math.pi * daylight_h
    days = stated_day(peak_sun_h, daylight_h, 25.0, 12.0, FLAT, step_minutes)
    assert days.poa_w_m2.sum() * days.step_h / 1000.0 == pytest.approx(peak_sun_h, rel=1e-12, abs=1e-12)
    assert days.poa_w_m2.min() >= 0.0
    assert days.poa_w_m2.max() <= 1400.0 + 1e-9


def test_a_stated_day_by_hand():
    # 5 peak sun hours in 10 h: a half sine of 5000·pi/(2·10) = 785.4 W/m2 from 7 to 17 h.
    days = stated_day(5.0, 10.0, 25.0, 12.0, Plane(0.0, 180.0, mounting="roof_gap"), 5)
    assert days.poa_w_m2.max() == pytest.approx(785.4, rel=1e-3)
    light = days.poa_w_m2 > 0.0
    assert days.solar_hour[light][[0, -1]] == pytest.approx([7.0 + 2.5 / 60.0, 17.0 - 2.5 / 60.0])
    at = np.searchsorted(days.solar_hour, 9.5)
    assert days.poa_w_m2[at] == pytest.approx(785.4 * math.sin(math.pi * (days.solar_hour[at] - 7.0) / 10.0), rel=1e-3)
    assert np.all(days.air_c[light] == 25.0)
    assert np.all(days.air_c[~light] == 12.0)
    assert np.array_equal(days.cell_c[~light], days.air_c[~light])
    assert days.cell_c.max() - 25.0 == pytest.approx(785.4 * (math.exp(-2.98 - 0.0471) + 0.001), rel=1e-3)
    assert np.all(days.weight_days == 365.0)
    assert (days.month.max(), days.day_kind.max()) == (0, DULL)
    assert (days.record_low_c, days.record_high_c) == (-3.0, 35.0)
    assert days.record_low_assumed


def test_a_stated_polar_day_and_night():
    night = stated_day(0.0, 0.0, -10.0, -20.0, FLAT)
    assert np.all(night.poa_w_m2 == 0.0)
    assert np.all(night.cell_c == -20.0)
    assert np.all(stated_day(4.0, 24.0, 5.0, 0.0, FLAT).air_c == 5.0)


def test_a_stated_record_is_kept():
    days = stated_day(5.0, 10.0, 25.0, 12.0, FLAT, record_low_c=-8.0, record_high_c=41.0)
    assert (days.record_low_c, days.record_high_c) == (-8.0, 41.0)
    assert not days.record_low_assumed
    assert not days.record_high_assumed


# --- refusals ---------------------------------------------------------------------------------------------------------

HALF = [0.5] * 12
HIGH_JUNE = [0.5] * 5 + [0.9] + [0.5] * 6
SITE, NAN, INF = Site(45.0, 0.0, 0.0), math.nan, math.inf
MONTHLY = monthly_from_kt(HALF, **MILD)

REFUSALS = [
    (lambda: Site(95.0, 0.0), "lat_deg", "95 is not a latitude: it must lie between -90 and 90"),
    (lambda: Site(NAN, 0.0), "lat_deg", "nan"),
    (lambda: Site(0.0, 361.0), "lon_deg", "361"),
    (lambda: Site(0.0, INF), "lon_deg", "inf"),
    (lambda: Site(0.0, 0.0, 9500.0), "altitude_m", "9500"),
    (lambda: altitude_default_m(91.0, 0.0), "lat_deg", "91"),
    (lambda: default_plane(-91.0), "lat_deg", "-91"),
    (lambda: monthly_from_kt(HIGH_JUNE, **MILD), "kt", "June: 0.9 is not"),
    (lambda: monthly_from_kt([NAN] * 12, **MILD), "kt", "January: nan"),
    (lambda: monthly_from_kt(HALF[:11], **MILD), "kt", "11 values"),
    (lambda: monthly_from_kt(["much"] * 12, **MILD), "kt", "not every value is a number"),
    (lambda: monthly_from_kt(HALF, [-91.0] * 12, [0.0] * 12), "air_min_c", "January: -91"),
    (lambda: monthly_from_kt(HALF, [10.0] * 12, [61.0] * 12), "air_max_c", "January: 61"),
    (lambda: monthly_from_kt(HALF, [10.0] * 12, [10.0] * 12), "air_max_c", "minimum 10 °C"),
    (lambda: monthly_from_kt(HALF, **MILD, record_low_c=11.0), "record_low_c", "11 °C"),
    (lambda: monthly_from_kt(HALF, **MILD, record_high_c=19.0), "record_high_c", "19 °C"),
    (lambda: monthly_from_kt(HALF, **MILD, record_high_c=NAN), "record_high_c", "nan"),
    (lambda: monthly_from_h(SITE, [5.0] * 12, **MILD), "h_kwh_m2", "January: 5 kWh/m²"),
    (lambda: monthly_from_h(SITE, [-1.0] * 12, **MILD), "h_kwh_m2", "January: -1"),
    (lambda: monthly_from_preset("atlantis"), "preset", "seville"),
    (lambda: Plane(91.0, 180.0), "tilt_deg", "91"),
    (lambda: Plane(30.0, 361.0), "azimuth_deg", "361"),
    (lambda: Plane(30.0, 180.0, albedo_frac=1.2), "albedo_frac", "1.2"),
    (lambda: Plane(30.0, 180.0, wind_m_s=-1.0), "wind_m_s", "-1"),
    (lambda: Plane(30.0, 180.0, mounting="balloon"), "mounting", "open_rack, roof_gap, flat_insulated"),
    (lambda: Plane(30.0, 180.0, noct_c=10.0), "noct_c", "10"),
    (lambda: three_day_year(SITE, MONTHLY, FLAT, 7), "step_minutes", "7 minutes"),
    (lambda: three_day_year(SITE, MONTHLY, FLAT, 0), "step_minutes", "0 minutes"),
    (lambda: three_day_year(SITE, MONTHLY, FLAT, 15, 29), "dark_days_per_month", "February: 29"),
    (lambda: three_day_year(SITE, MONTHLY, FLAT, 15, [1, 2]), "dark_days_per_month", "2 values"),
    (lambda: three_day_year(SITE, MONTHLY, FLAT, linke_turbidity=0.5), "linke_turbidity", "0.5"),
    (lambda: stated_day(9.0, 8.0, 20.0, 10.0, FLAT), "peak_sun_h", "between 0 and 7.13"),
    (lambda: stated_day(-1.0, 8.0, 20.0, 10.0, FLAT), "peak_sun_h", "-1"),
    (lambda: stated_day(NAN, 8.0, 20.0, 10.0, FLAT), "peak_sun_h", "nan"),
    (lambda: stated_day(1.0, 25.0, 20.0, 10.0, FLAT), "daylight_h", "25"),
    (lambda: stated_day(1.0, 0.0, 20.0, 10.0, FLAT), "peak_sun_h", "0 h of daylight"),
    (lambda: stated_day(5.0, 10.0, 70.0, 10.0, FLAT), "day_air_c", "70"),
    (lambda: stated_day(5.0, 10.0, 20.0, -95.0, FLAT), "night_air_c", "-95"),
    (lambda: stated_day(5.0, 10.0, 20.0, 10.0, FLAT, record_low_c=15.0), "record_low_c", "15"),
]


@pytest.mark.parametrize(("doing", "field", "words"), REFUSALS)
def test_nonsense_is_refused_by_name_with_value_and_bound(doing, field, words):
    with pytest.raises(InputError) as refused:
        doing()
    assert refused.value.field == field
    assert words in refused.value.sentence
