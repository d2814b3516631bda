"""Study: the answer to a Job, as plain records that JSON, page and sheet are three views of."""

from dataclasses import dataclass
from typing import Literal

from server.catalog.part import Part

Outcome = Literal["pass", "marginal", "fail", "info"]
Standing = Literal["pass", "marginal", "confirm", "fail", "reference"]
VerdictKind = Literal["fit_part", "fit_none", "controller_blocks", "nothing_safe"]
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
