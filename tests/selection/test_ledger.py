"""The ledgers against a day added up by hand: each step solved on its own, from textbook formulas, by bisection."""

import math

import pytest
from scipy.optimize import brentq
from worked_jobs import CLASSES, launch

from server.selection import site, study
from server.web.schemas import JobIn

K_EV, T0 = 8.617333262e-5, 298.15


def day_by_hand(job, law, *, bank_day_v, bank_night_v, rth, box_day_c, box_night_c):
    """Ah in, Wh of heat, Ah drained over one day of one string; and Ah in through a perfect valve."""
    days = site.site_days(job).days
    string = site.string_spec(job).spec
    module = string.module
    dark_ohm = site.dark_shunts(job, string)[1]
    charged = heat = drained = ideal = 0.0
    for sun, cell_c in zip(days.poa_w_m2, days.cell_c, strict=True):
        t = cell_c + 273.15
        photo = sun / 1000 * (module.photo_a + module.isc_a_per_k * (t - T0))
        gap = 1.121 * (1 - 0.0002677 * (t - T0))
        sat = module.saturation_a * (t / T0) ** 3 * math.exp((1.121 / T0 - gap / t) / K_EV)
        slope = module.slope_v * t / T0
        fade = math.exp(-5.5)
        base = (module.shunt_ohm - dark_ohm * fade) / (1 - fade)
        shunt = base + (dark_ohm - base) * math.exp(-5.5 * sun / 1000)
        bank, box = (bank_day_v, box_day_c) if sun > 0 else (bank_night_v, box_night_c)

        def given(y, photo=photo, sat=sat, slope=slope, shunt=shunt):
            return photo - sat * math.expm1(y / slope) - y / shunt

        def diode_is(tj):
            tk = tj + 273.15
            grown = law.temperature_power / law.ideality * math.log(tk / T0)
            return law.saturation_a * math.exp(grown + law.barrier_ev / (law.ideality * K_EV) * (1 / T0 - 1 / tk))

        ohm = job.loop_ohm + module.series_ohm
        if given(bank) > 0:
            top = brentq(given, 0, 100)
            valve_y = brentq(lambda y, b=bank, g=given, r=ohm: y - b - g(y) * r, bank, top)
            ideal += given(valve_y) * days.step_h
            tj = box
            for _ in range(60):
                n_vt = law.ideality * K_EV * (tj + 273.15)
                i_s = diode_is(tj)
                inner = law.series_ohm + law.series_ohm_per_k * (tj - 25)

                def off(y, n_vt=n_vt, i_s=i_s, b=bank, g=given, r=ohm, inner=inner):
                    i = max(g(y), 0.0)
                    return y - b - i * (r + inner) - n_vt * math.log1p(i / i_s)

                amps = max(given(brentq(off, bank, top, xtol=1e-13)), 0.0)
                drop = n_vt * math.log1p(amps / i_s) + amps * inner
                tj = box + rth * amps * drop
            charged += amps * days.step_h
            heat += amps * drop * days.step_h
        else:
            tj = box
            n_vt = law.ideality * K_EV * (tj + 273.15)
            leak = law.leakage_a * math.exp(law.leakage_ev / K_EV * (1 / T0 - 1 / (tj + 273.15)))

            def shape(u):
                c = 0.1
                full = (law.leakage_ref_v**2 + c * c) ** (law.leakage_exponent / 2) - c**law.leakage_exponent
                return ((u * u + c * c) ** (law.leakage_exponent / 2) - c**law.leakage_exponent) / full

            first = min(diode_is(tj), 0.5 * leak, leak * shape(1.0))
            width = n_vt * first / diode_is(tj)

            def back(u, first=first, width=width, leak=leak, b=bank, g=given, r=ohm):
                i = first * -math.expm1(-u / width) + (leak - first) * shape(u)
                return i + g(b - u - i * r)

            u = brentq(back, 0, bank, xtol=1e-14)
            drained += (first * -math.expm1(-u / width) + (leak - first) * shape(u)) * days.step_h
    return charged, heat, drained, ideal


@pytest.mark.parametrize("name", ["S45", "PN10"])
def test_a_day_added_up_by_hand(name):
    job = JobIn.model_validate(launch(own_diodes=[CLASSES[name]])).to_job()
    law = job.parts[0].typical
    charged, heat, drained, ideal = day_by_hand(
        job, law, bank_day_v=13.0, bank_night_v=12.7, rth=15.0, box_day_c=45.0, box_night_c=22.0
    )
    found = study.run(job)
    ledger = found.candidate(name.lower()).typical
    assert ledger.delivered_ah[0] == pytest.approx(charged, rel=1e-7)
    assert ledger.heat_wh[0] == pytest.approx(heat, rel=1e-6)
    # By night the junction warms by microwatts, which the hand leaves out.
    assert ledger.night_drain_ah[0] == pytest.approx(drained, rel=1e-3)
    assert ledger.day_loss_ah[0] == pytest.approx(ideal - charged, rel=1e-5)


def test_heat_and_loss_in_watt_hours_at_the_banks_voltage():
    found = study.run(JobIn.model_validate(launch()).to_job())
    for item in found.candidates:
        ledger = item.typical
        assert ledger.delivered_wh[0] == pytest.approx(13.0 * ledger.delivered_ah[0], rel=1e-9)
        assert ledger.night_drain_wh[0] == pytest.approx(12.7 * ledger.night_drain_ah[0], rel=1e-9, abs=1e-12)
        assert ledger.net_ah[0] == pytest.approx(ledger.delivered_ah[0] - ledger.night_drain_ah[0], rel=1e-12)
        assert ledger.year_net_wh == pytest.approx(365 * ledger.net_wh[0], rel=1e-9)


def test_an_active_rectifiers_own_supply_is_drawn_round_the_clock():
    found = study.run(JobIn.model_validate(launch()).to_job())
    active = found.candidate("id").typical
    # 80 uA for 24 h, and less than 1 uA of leakage by night.
    assert active.night_drain_ah[0] == pytest.approx(24 * 80e-6, rel=0.01)
    assert active.night_drain_ah[0] >= 24 * 80e-6


def test_behind_a_converter_the_bank_gets_watts_not_amperes():
    values = launch(controller="mppt", blocks_at_night="no", converter_efficiency_frac=0.9)
    found = study.run(JobIn.model_validate(values).to_job())
    whole = study.run(JobIn.model_validate({**values, "converter_efficiency_frac": 1.0}).to_job())
    for key in ("s45", "pn10", "none"):
        part, full = found.candidate(key).typical, whole.candidate(key).typical
        assert part.delivered_wh[0] == pytest.approx(0.9 * full.delivered_wh[0], rel=1e-9)
        assert part.delivered_ah[0] == pytest.approx(part.delivered_wh[0] / 13.0, rel=1e-9)
