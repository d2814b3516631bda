"""Study: the answer to a Job, as plain records that JSON, page and sheet are three views of."""

from dataclasses import dataclass
from typing import Literal

from server.catalog.part import Part

Outcome = Literal["pass", "marginal", "fail", "info"]
Standing = Literal["pass", "marginal", "confirm", "fail", "reference"]
VerdictKind = Literal["fit_part", "fit_none", "controller_blocks", "nothing_safe"]
Bus = Literal["bank connected", "bank disconnected"]
SourceStatus = Literal["read", "from memory", "common practice", "arithmetic"]


@dataclass(frozen=True, slots=True)
class Check:
    """One limit: what is met in the worst case, what is allowed, and how much is left.

    `margin_frac` is (allowed − met)/allowed for an upper limit, (met − allowed)/allowed for a lower one; None where the
    check is a yes or no.
    """

    code: str
    title: str
    met: float | None
    allowed: float | None
    unit: str
    margin_frac: float | None
    outcome: Outcome
    rule: str
    source_status: SourceStatus
    sentence: str


@dataclass(frozen=True, slots=True)
class Ledger:
    """One candidate, one corner: a mean day of each period, array totals (all strings).

    Tuples have one entry per period (twelve months, or the one stated day). "Day loss" is what the battery misses
    against a perfect valve; heat is what the diode dissipates; the two are not the same ledger. Night drain is what
    flows back out of the bank, the active rectifier's own supply counted with it.
    """

    heat_wh: tuple[float, ...]
    delivered_ah: tuple[float, ...]
    delivered_wh: tuple[float, ...]
    day_loss_ah: tuple[float, ...]
    day_loss_wh: tuple[float, ...]
    full_loss_ah: tuple[float, ...]
    """The day loss if the bank sat at absorption voltage all day: the end of charge at its worst."""
    night_drain_ah: tuple[float, ...]
    night_drain_wh: tuple[float, ...]
    net_ah: tuple[float, ...]
    net_wh: tuple[float, ...]
    year_heat_wh: float
    year_delivered_wh: float
    year_day_loss_ah: float
    year_day_loss_wh: float
    year_night_drain_ah: float
    year_night_drain_wh: float
    year_net_ah: float
    year_net_wh: float


@dataclass(frozen=True, slots=True)
class DarkBand:
    """Net and drain in the deciding period for a low, middle and high dark current of the string (three values)."""

    night_drain_ah: tuple[float, float, float]
    night_a: tuple[float, float, float]
    """Mean current out of the bank while it is dark, a magnitude."""
    net_ah: tuple[float, float, float]
    net_wh: tuple[float, float, float]


@dataclass(frozen=True, slots=True)
class ReverseHeat:
    """One part in reverse at the worst hour, in the hottest air. Temperatures that do not exist are None.

    No stable point: the leakage runs away from any temperature. Tipping: a junction hotter than this at the moment of
    reversal runs away. Critical ambient: no stable point exists in warmer air. Allowable ambient: air in which forward
    heat and the leakage's heat together hold the junction at its limit.
    """

    reverse_v: float
    stable_typical_c: float | None
    stable_maximum_c: float | None
    tipping_typical_c: float | None
    tipping_maximum_c: float | None
    critical_ambient_typical_c: float | None
    critical_ambient_maximum_c: float | None
    allowable_ambient_c: float


@dataclass(frozen=True, slots=True)
class SecondSource:
    """The bank held up at night by wind, hydro or a generator: amperes out of the bank into the array, magnitudes."""

    bus_v: float
    without_a: float
    typical_a: float
    maximum_a: float
    stress_v: float
    sentence: str


@dataclass(frozen=True, slots=True)
class Crossover:
    """Night temperatures at which the best silicon diode overtakes the choice; None: never within the asked range."""

    rival: str
    title: str
    typical_c: float | None
    maximum_c: float | None
    sentence: str


@dataclass(frozen=True, slots=True)
class Candidate:
    """One part, or one of the two references, judged."""

    key: str
    title: str
    technology: str
    part: Part | None
    standing: Standing
    rank: int | None
    """1 is the verdict's choice; None for what failed and for the perfect valve."""
    typical: Ledger
    maximum: Ledger
    dark_typical: DarkBand
    dark_maximum: DarkBand
    checks: tuple[Check, ...]
    hottest_junction_c: float | None
    worst_power_w: float | None
    rth_c_per_w: float | None
    rth_origin: str
    sink_needed_c_per_w: float | None
    sink_to_buy_c_per_w: float | None
    """The figure, quoted at 75 °C of rise, that such a sink has in a catalogue."""
    reverse_heat: ReverseHeat | None
    tied: bool
    """Within the resolution of the ranking of the best: heat decided, not energy."""
    reasons: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Verdict:
    """The answer in one sentence, and what it hangs on."""

    kind: VerdictKind
    sentence: str
    choice: str | None
    runner_up: str | None
    because: tuple[str, ...]
    would_change: tuple[str, ...]
    stable: bool
    stability: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Caution:
    """One warning this job calls for; 1 is the most dangerous."""

    code: str
    rank: int
    title: str
    sentence: str
    source: str


@dataclass(frozen=True, slots=True)
class Note:
    """A remark with a stable code, for readers and for programs."""

    code: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Assumption:
    """A value that was not given, and where it came from."""

    field: str
    value: str
    origin: str


@dataclass(frozen=True, slots=True)
class SiteFacts:
    """What the study worked with, worked out from the job."""

    climate_source: str
    climate_rough: bool
    periods: tuple[str, ...]
    period_days: tuple[float, ...]
    deciding_period: int
    sun_kwh_m2: tuple[float, ...]
    dark_hours: tuple[float, ...]
    night_air_c: tuple[float, ...]
    record_low_c: float
    record_high_c: float
    string_voc_v: float
    cold_voc_v: float
    cold_voc_method: str
    hot_vmp_v: float
    reverse_stress_v: float
    night_v: float
    day_v: float
    full_v: float
    loop_ohm: float
    strings: int
    array_w: float
    cells: int
    box_hottest_c: float
    dark_shunt_ohm: tuple[float, float, float]
    label_misfit_frac: float
    label_misfit_field: str
    label_method: str


@dataclass(frozen=True, slots=True)
class Audit:
    """Whether every cell was solved and every watt accounted for."""

    cells: int
    not_converged: int
    worst_imbalance_w: float
    worst_imbalance_frac: float


@dataclass(frozen=True, slots=True)
class FaultCase:
    """One fault: amperes into the faulty string, magnitudes. None: not limited by anything this study knows."""

    code: str
    title: str
    bus: Bus
    without_a: float | None
    typical_a: float | None
    maximum_a: float | None
    """With one diode per string, a typical and a maximum part; None also where no part is chosen."""
    allowed_a: float | None
    """The module's maximum series fuse, or the string cable's ampacity if that is less; None: neither is given."""
    outcome: Outcome
    sentence: str


@dataclass(frozen=True, slots=True)
class FaultStudy:
    """All cases, and the words that hold for all of them."""

    cases: tuple[FaultCase, ...]
    fuse_window_a: tuple[float, float]
    fuse_sentence: str
    battery_fuse_sentence: str
    last_word: str


@dataclass(frozen=True, slots=True)
class NightWindow:
    """Current out of the bank into one string in the dark, a magnitude, for one state of the diode."""

    state: str
    code: str
    low_a: float
    high_a: float
    by_day: str
    """What the same state does by day, in words."""


@dataclass(frozen=True, slots=True)
class DropReading:
    """Volts across the whole part at a current, with its junction and its lead or case at about these temperatures."""

    current_a: float
    low_v: float
    high_v: float
    junction_c: float
    lead_c: float | None
    """None where no sheet prints the resistance from junction to lead or case."""


@dataclass(frozen=True, slots=True)
class FieldTest:
    """What a meter should show, one string at a time."""

    bank_v: float
    night_air_c: float
    night: tuple[NightWindow, ...]
    pass_below_a: float | None
    """A reading under this passes; None where a sound diode and a shorted one cannot be told apart by night."""
    shunt_ohm: tuple[float, float]
    shunt_pass_v: tuple[float, float] | None
    clamp_turns: int
    clamp_pass_a: float | None
    voltmeter_trap_v: float | None
    """What a 10 Mohm voltmeter shows on the panel side of a SOUND diode with the panel disconnected."""
    day: tuple[DropReading, ...]
    trap_sentence: str


@dataclass(frozen=True, slots=True)
class Study:
    """The whole answer."""

    engine_version: str
    verdict: Verdict
    facts: SiteFacts
    candidates: tuple[Candidate, ...]
    """In order of rank, then what failed, then the references."""
    site_checks: tuple[Check, ...]
    cautions: tuple[Caution, ...]
    warnings: tuple[Note, ...]
    assumptions: tuple[Assumption, ...]
    audit: Audit
    faults: FaultStudy
    field_test: FieldTest | None
    """None where nothing is safe to fit."""
    second_source: SecondSource | None
    crossover: Crossover | None
    day: "DayTrace"

    def candidate(self, key: str) -> Candidate:
        """The candidate of that key; KeyError for none."""
        for item in self.candidates:
            if item.key == key:
                return item
        raise KeyError(key)


@dataclass(frozen=True, slots=True)
class DayTrace:
    """The clear day (or the stated one) of the deciding period, step by step, one string of the choice, typical."""

    title: str
    solar_hour: tuple[float, ...]
    poa_w_m2: tuple[float, ...]
    current_a: tuple[float, ...]
    junction_c: tuple[float, ...]
