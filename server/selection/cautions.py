"""The DC-safety cautions this job calls for, most dangerous first. Local code and licensed practice decide."""

from collections.abc import Callable, Sequence
from dataclasses import dataclass

from server.selection.job import Job
from server.selection.ratings import live_at
from server.selection.result import Candidate, Caution, Check, SiteFacts

LAST_WORD = "This sheet is an aid, not a certificate: local code and licensed practice decide."


@dataclass(frozen=True, slots=True)
class Situation:
    """What a caution may look at."""

    job: Job
    facts: SiteFacts
    choice: Candidate | None
    site_checks: tuple[Check, ...]

    def choice_check(self, code: str) -> Check | None:
        """The choice's check of that code."""
        if self.choice is None:
            return None
        return next((item for item in self.choice.checks if item.code == code), None)

    def site_check(self, code: str) -> Check | None:
        """The site's check of that code."""
        return next((item for item in self.site_checks if item.code == code), None)

    @property
    def fits_part(self) -> bool:
        """Whether a part is to be fitted."""
        return self.choice is not None and self.choice.part is not None


Say = Callable[[Situation], str | None]


def _always(sentence: str) -> Say:
    return lambda _: sentence


def _when(applies: Callable[[Situation], bool], sentence: str) -> Say:
    return lambda situation: sentence if applies(situation) else None


def _over_30_v(s: Situation) -> str | None:
    volts = s.facts.cold_voc_v
    text = (
        "Never pull a connector, fuse or diode lead while current flows: a DC arc does not go out by itself. Open the "
        "rated DC disconnect or cover the array, then prove zero current with a clamp meter. In daylight the array "
        "side is live with every switch open."
    )
    return text + (f" This string reaches {volts:.0f} V." if volts > 30 else "")


def _touch(s: Situation) -> str | None:
    check = s.choice_check("touch")
    if check is None or check.met is None:
        return None
    return (
        f"The diode's case is hot every sunny hour, and may reach {check.met:.0f} °C on the worst day: mount it on "
        "something that does not burn, with clearance, out of reach or guarded."
    )


def _polarity(s: Situation) -> str | None:
    if not s.fits_part:
        return None
    where = {
        "negative": "Put it in the positive conductor: anode towards the array, cathode (band) towards the battery",
        "positive": "Put it in the negative conductor: anode to the bank's side, band to the array's negative",
        "floating": "Put it in the positive conductor (a floating system): anode to the array, band to the bank",
    }[s.job.earthing]
    return (
        f"{where}, on the panel side of the controller. Test with the meter's diode range one way only, then the night "
        "current, then charge current and a warm body. Reversed, nothing charges; no series diode saves a reversed "
        "battery."
    )


def _live_tab(s: Situation) -> str | None:
    if s.choice is None or s.choice.part is None or s.choice.part.tab_live is not True:
        return None
    return (
        f"The tab is the cathode: a sink screwed to it stands at {live_at(s.job)}. Insulate it with pad and bush, or "
        "isolate and cover the sink; check more than 10 MΩ to the chassis before energising."
    )


def _string_fuse(s: Situation) -> str | None:
    check = s.site_check("string_fuse")
    if check is None or check.outcome == "pass":
        return None
    return f"With {s.job.array.strings} strings, {check.sentence}. A blocking diode is no substitute: it fails short."


def _controller(s: Situation) -> str | None:
    if s.job.charge.controller not in ("series", "mppt"):
        return None
    place = (
        "Never put the diode between controller and battery, where it falsifies the battery voltage that the "
        "controller sees."
    )
    if s.job.charge.blocks_at_night == "no":
        return place
    return f"Many controllers of this family block by themselves: read the manual. {place}"


def _headroom(s: Situation) -> str | None:
    check = s.choice_check("headroom")
    if check is None or check.margin_frac is None or check.margin_frac >= 0:
        return None
    return f"Hot days: {check.sentence}."


def _fed_fault(s: Situation) -> str | None:
    if s.job.charge.blocks_at_night == "yes":
        return None
    if s.fits_part:
        return (
            "Once a diode has failed short, a chafed cable or a shorted module behind it is fed by the bank: the fuse "
            "at the battery protects the cable, and must not exceed what the modules allow."
        )
    return (
        "Without a diode a chafed cable or a shorted module is fed by the bank. The fuse at the battery is what "
        "protects the cable; a diode at the battery's end would keep the bank out of a short on the roof run."
    )


def _no_regulator(s: Situation) -> str | None:
    check = s.site_check("self_regulated")
    if check is None or check.outcome == "pass":
        return None
    if check.outcome == "info":
        return (
            "Nothing stops the charge when the bank is full. Without a regulator the largest charge current in one "
            "hour must stay below 3 % of the bank's Ah, which are not given here."
        )
    return (
        "Nothing stops the charge when the bank is full. This array is too strong for the bank to go without a "
        "regulator: expect overcharge, water loss and heat."
    )


def _lithium_cold(s: Situation) -> bool:
    return s.job.bank.chemistry in ("lifepo4", "li_ion") and s.facts.record_low_c < 0


# Code, title, source, and when to say what; the order is the order of danger.
RULES: Sequence[tuple[str, str, str, Say]] = (
    ("dc_arc", "DC arc", "NEC 2017 690.33(E), read", _over_30_v),
    (
        "battery_fault_current",
        "Battery fault current",
        "NEC 2017 690.9, read",
        _always(
            "A bank feeds a short with hundreds to thousands of amperes. Put a fuse or breaker with enough DC "
            "interrupting rating within reach of the battery terminal, in the conductor that is not earthed: it "
            "protects the cable, which no diode does."
        ),
    ),
    (
        "not_a_fuse",
        "A diode is neither fuse nor switch",
        "silicon overheated in test failed short, read in abstract",
        _when(
            lambda s: s.fits_part,
            "The diode is not overcurrent protection, not a disconnect and not a charge regulator. Overheated, it "
            "usually fails short: charging looks perfect and the night drain is back. Measure the night current after "
            "fitting and once a year.",
        ),
    ),
    (
        "hydrogen",
        "Hydrogen",
        "traction-battery trade page, read",
        _when(
            lambda s: s.job.bank.facts.lead_acid or s.job.bank.chemistry == "nicd",
            "A charging bank of this chemistry gives off hydrogen: ventilate it, keep it below 1 % in air, and put no "
            "spark, relay or diode box above the cells or within half a metre of them.",
        ),
    ),
    ("no_regulator", "No regulator", "NEC 2017 690.72, read", _no_regulator),
    (
        "shunt_regulator",
        "Shunt regulator",
        "common practice",
        _when(
            lambda s: s.job.charge.controller == "shunt",
            "When the bank is full this regulator shorts the panel: the series diode then stands hot under battery "
            "voltage in reverse. Leave it out or let it fail short, and the regulator shorts the bank.",
        ),
    ),
    (
        "active_confirm",
        "Active rectifier",
        "common practice",
        _when(
            lambda s: s.fits_part and s.choice is not None and s.choice.technology == "active",
            "An active rectifier turns off only after a little current has flowed backward, and draws its own supply. "
            "Ask its maker about a shorted panel, and check its absolute maximum voltage against the coldest string.",
        ),
    ),
    ("fed_fault", "The bank feeds a fault", "arithmetic", _fed_fault),
    ("string_fuse", "String fuses", "NEN 1010:2020 712.431.4, as explained by a trade page, read", _string_fuse),
    (
        "live_tab",
        "Live tab",
        "package practice, from memory",
        _live_tab,
    ),
    (
        "polarity",
        "Polarity",
        "common practice",
        _polarity,
    ),
    ("hot_case", "Burns and fire", "60 °C, from memory", _touch),
    (
        "junction_box",
        "Not in the sealed junction box",
        "a seller's advice, read",
        _when(
            lambda s: s.fits_part and s.job.heat.box == "junction_box",
            "The module's sealed box was made for diodes that hardly ever conduct. A blocking diode heats it every "
            "sunny hour: place it in a shaded, ventilated box.",
        ),
    ),
    (
        "parallel",
        "Parallel packages do not share",
        "negative VF slope, arithmetic",
        _when(
            lambda s: (
                s.fits_part and (s.job.legs == "both" or (s.job.array.strings > 1 and s.job.placement == "array"))
            ),
            "The warmer of two diodes takes more of the current: use one chip per string, or one larger part. Only the "
            "two dies of one package share a temperature.",
        ),
    ),
    ("controller_check", "Ask the controller first", "kit maker's sheet, read", _controller),
    (
        "lithium_cold",
        "No charge below freezing",
        "from memory",
        _when(
            _lithium_cold,
            "Lithium cells must not be charged below 0 °C unless their maker allows it; nights here go below. The "
            "battery's own protection may open: the bus then jumps to the string's open-circuit voltage.",
        ),
    ),
    ("headroom", "Little headroom", "arithmetic", _headroom),
    (
        "over_irradiance",
        "More than 1000 W/m²",
        "Yordanov, Solar Energy (2015), read in abstract",
        _when(
            lambda s: s.fits_part,
            "Cloud edges, snow and altitude lift the current to 1.25 × Isc for long and 1.6 × for seconds: do not size "
            "on Imp.",
        ),
    ),
    (
        "surge",
        "Lightning",
        "from memory",
        _when(
            lambda s: s.fits_part and s.facts.loop_ohm > 0,
            "Diodes die from surges: on exposed sites fit suppression across the array's lines.",
        ),
    ),
    (
        "isolation",
        "Isolation and labels",
        "NEC 2017 690.53, read",
        _always(
            "Have a two-pole disconnect between array and battery, lockable, labelled with the highest voltage and "
            "current."
        ),
    ),
    ("law", "Law", "NEC 2017 690.4(C), read", _always(LAST_WORD)),
)


def cautions(situation: Situation) -> tuple[Caution, ...]:
    """Those of `RULES` that this job calls for, in order of danger."""
    said: list[Caution] = []
    for code, title, source, say in RULES:
        sentence = say(situation)
        if sentence is not None:
            said.append(Caution(code, len(said) + 1, title, sentence, source))
    return tuple(said)
