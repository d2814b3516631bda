"""What to measure after fitting: windows by night and by day for a sound diode, a shorted one, a reversed one, none."""

import numpy as np

from server.physics.diode import ActiveLaw, DiodeCells, forward_drop_v, reverse_a
from server.selection.figures import figure
from server.selection.job import Job
from server.selection.result import Candidate, DropReading, FieldTest, NightWindow, SiteFacts

METER_FRAC = 0.05  # a meter and a joint, on both sides
SHUNTS_OHM = (0.1, 1.0)
CLAMP_TURNS = 10
VOLTMETER_OHM = 10e6
DAY_SHARES = (0.25, 0.5, 1.0)
MEASURING_AIR_C = 30.0  # air around the diode while someone measures
TELLING_RATIO = 3.0  # windows nearer than this cannot be told apart


def field_test(job: Job, facts: SiteFacts, choice: Candidate, none: Candidate) -> FieldTest:
    """The windows of this job for the candidate fitted (or for none)."""
    strings = job.array.strings
    bare_low, bare_high = (x / strings for x in (min(none.dark_typical.night_a), max(none.dark_typical.night_a)))
    blocked = job.charge.blocks_at_night == "yes"
    night = []
    pass_below = trap_v = None
    if choice.part is not None:
        sound = [x / strings for x in (*choice.dark_typical.night_a, *choice.dark_maximum.night_a)]
        most = max(sound) + _supply_a(choice)
        night.append(NightWindow("as designed", "designed", min(sound), most, "charges; the body warms"))
        if not blocked:
            pass_below = _between(most, bare_low)
            trap_v = _voltmeter_v(job, choice, facts)
        night.append(NightWindow("diode shorted", "shorted", bare_low, bare_high, "charges; 0 V across it; stays cool"))
        night.append(NightWindow("diode reversed", "reversed", bare_low, bare_high, "no charge at all"))
    night.append(
        NightWindow("no diode", "none", bare_low, bare_high, "charges")
        if not blocked
        else NightWindow("controller blocks", "blocked", 0.0, 0.0, "charges")
    )
    air = facts.night_air_c[facts.deciding_period]
    return FieldTest(
        facts.night_v,
        air,
        tuple(night),
        pass_below,
        SHUNTS_OHM,
        None if pass_below is None else (pass_below * SHUNTS_OHM[0], pass_below * SHUNTS_OHM[1]),
        CLAMP_TURNS,
        None if pass_below is None else pass_below * CLAMP_TURNS,
        trap_v,
        _by_day(job, choice),
        _trap_words(trap_v, facts.night_v),
    )


def _trap_words(trap_v: float | None, bank_v: float) -> str:
    """What a voltmeter alone shows on the panel's side of a sound diode, and how not to be misled."""
    how = "load the point with 1 to 10 kΩ, or leave the panel on"
    if trap_v is None:
        return f"a voltmeter alone tells nothing of a diode, whose leakage may be less than the meter takes: {how}"
    return (
        f"a 10 MΩ voltmeter on the panel side, the panel disconnected, shows {figure(trap_v, 3)} V of "
        f"{figure(bank_v, 3)} V through a sound diode, for the meter's microampere is all the leakage it needs: {how}"
    )


def _between(sound_a: float, bare_a: float) -> float | None:
    """A limit between two windows, at their geometric mean; None where they lie too near."""
    if bare_a <= 0 or sound_a <= 0 or bare_a / sound_a < TELLING_RATIO:
        return None
    return float(np.sqrt(sound_a * bare_a))


def _supply_a(choice: Candidate) -> float:
    """What an active rectifier may take from the bank for itself: in the meter's reading if its supply comes that way.

    A. It stands in the window's upper end only, for the circuit around it decides from which side it is fed.
    """
    laws = () if choice.part is None else (choice.part.typical, choice.part.maximum)
    return max((law.supply_a for law in laws if isinstance(law, ActiveLaw)), default=0.0)


def _cells(job: Job, choice: Candidate) -> DiodeCells | None:
    if choice.part is None:
        return None
    legs = choice.part.parallel_legs if job.legs == "both" else 1
    return DiodeCells.of([choice.part.typical, choice.part.maximum], [legs, legs])


def _voltmeter_v(job: Job, choice: Candidate, facts: SiteFacts) -> float | None:
    """Where the typical part's leakage meets the meter's own 10 Mohm, by halving: leakage falls as the meter rises."""
    cells = _cells(job, choice)
    if cells is None:
        return None
    air = np.array(facts.night_air_c[facts.deciding_period])
    low, high = 0.0, facts.night_v
    for _ in range(60):
        meter_v = 0.5 * (low + high)
        leak_a = float(reverse_a(cells, np.array(facts.night_v - meter_v), air)[0])
        low, high = (meter_v, high) if leak_a > meter_v / VOLTMETER_OHM else (low, meter_v)
    return 0.5 * (low + high)


def _by_day(job: Job, choice: Candidate) -> tuple[DropReading, ...]:
    cells = _cells(job, choice)
    if cells is None or choice.part is None or choice.rth_c_per_w is None:
        return ()
    strings = job.array.strings if job.placement == "array" else 1
    inner = choice.part.rth_jl_c_per_w or choice.part.rth_jc_c_per_w
    found = []
    for share in DAY_SHARES:
        amps = share * job.array.label.imp_a * strings
        junction = MEASURING_AIR_C
        drops = np.zeros(2)
        for _ in range(12):  # the drop hardly moves with temperature, so a few rounds settle it
            drops = forward_drop_v(cells, np.array([amps]), np.array([junction]))
            junction = MEASURING_AIR_C + min(choice.rth_c_per_w * amps * float(drops.mean()), 200.0)
        power = amps * float(drops.mean())
        lead = None if inner is None else max(junction - inner * power, MEASURING_AIR_C)
        low, high = float(drops.min()) * (1 - METER_FRAC), float(drops.max()) * (1 + METER_FRAC)
        found.append(DropReading(amps, low, high, junction, lead))
    return tuple(found)
