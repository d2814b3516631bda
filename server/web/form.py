"""An address -> a job, or what is wrong with it and everything that was typed; and the worked example."""

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass

from pydantic import ValidationError
from starlette.datastructures import QueryParams

from server.web import refusals
from server.web.fields import LABELS, Field, Group
from server.web.refusals import Refusal
from server.web.schemas import JobIn

LIST_FIELDS = {
    "candidates",
    "own_diodes",
    "in_hand",
    "kt_monthly",
    "h_kwh_m2_monthly",
    "air_min_c_monthly",
    "air_max_c_monthly",
}

# A site of our own invention; the figures are those of an ordinary 36-cell module of the 100 W class.
DEMO = JobIn(
    module_voc_v=22.3,
    module_isc_a=5.92,
    module_vmp_v=18.4,
    module_imp_a=5.45,
    cells=36,
    chemistry="agm",
    battery_nominal_v=12,
    battery_ah=75,
    controller="shunt",
    preset="london",
    cable_one_way_m=7,
    cable_mm2=4,
)
DEMO_STORY = (
    "Counting hide at Reedmere Spit: one 36-cell module of the 100 W class keeps a bird counter’s 12 V AGM battery "
    "charged through a regulator that shorts the panel when the battery is full."
)


# --- reading an address -----------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class FormState:
    """What was typed, and what is wrong with it."""

    values: Mapping[str, str]
    refusals: tuple[Refusal, ...] = ()

    def value(self, field: Field) -> str:
        """What the field shows: what was typed, else its default."""
        return self.values.get(field.name, field.default)

    def sentences(self, name: str) -> list[str]:
        """What is wrong with a field, or with something inside it."""
        return [r.sentence for r in self.refusals if r.field.split("[")[0].split(".")[0] == name]

    def strays(self) -> list[Refusal]:
        """Refusals that no field of the form can show."""
        return [r for r in self.refusals if r.field.split("[")[0].split(".")[0] not in LABELS]

    def at_fault(self, group: Group) -> bool:
        """Whether a field of the group is at fault, or was changed."""
        return any(self.sentences(field.name) for field in group.fields)


def typed(query: QueryParams) -> dict[str, str]:
    """Every name as typed, for the page to keep; repeated names of lists joined."""
    kept: dict[str, list[str]] = {}
    for name, value in query.multi_items():
        kept.setdefault(name, []).append(value)
    return {name: ", ".join(values) if name in LIST_FIELDS else values[-1] for name, values in kept.items()}


def shown_values(given: JobIn) -> dict[str, str]:
    """A job as the form shows it."""
    return {
        name: " ".join(map(str, value))
        if isinstance(value, list)
        else f"{value:g}"
        if isinstance(value, float)
        else str(value)
        for name, value in given.model_dump(exclude_unset=True, exclude_none=True).items()
    }


def read_query(query: QueryParams) -> tuple[JobIn | None, list[Refusal]]:
    """The job in an address, or what is wrong with it. Empty values are fields left out."""
    found: dict[str, list[str]] = {}
    for name, value in query.multi_items():
        if value.strip():
            found.setdefault(name, []).append(value)
    repeated = [
        Refusal(refusals.readable(name), f"it is given {len(values)} times; give it once")
        for name, values in found.items()
        if len(values) > 1 and name in JobIn.model_fields and name not in LIST_FIELDS
    ]
    raw = {name: values if name in LIST_FIELDS else values[-1] for name, values in found.items()}
    return _validated(raw, repeated)


def _validated(
    raw: Mapping[str, str | Sequence[str]], already: Iterable[Refusal]
) -> tuple[JobIn | None, list[Refusal]]:
    told = list(already)
    try:
        given = JobIn.model_validate(raw)
    except ValidationError as bad:
        return None, told + refusals.of_validation(bad.errors(include_url=False), JobIn)
    return (None, told) if told else (given, told)
