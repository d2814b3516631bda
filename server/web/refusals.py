"""What is wrong with a request, in our own words: one record, one shape, whoever noticed it."""

import difflib
import re
import types
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Annotated, Any, Union, get_args, get_origin

from pydantic import BaseModel

from server.errors import InputError

PROBLEM_TYPE = "application/problem+json"
SHOWN_CHARACTERS = 40
SHOWN_ERRORS = 50

# Names that the inner rooms give to what the form calls otherwise.
FORM_NAMES = {
    "kt": "kt_monthly",
    "h_kwh_m2": "h_kwh_m2_monthly",
    "air_min_c": "air_min_c_monthly",
    "air_max_c": "air_max_c_monthly",
}
UNION_TAGS = {"own", "named"}

TITLES = {
    400: "The request cannot be read",
    404: "There is nothing at this address",
    405: "This address does not take that method",
    413: "The request is too large",
    414: "The address is too long",
    415: "The body is not JSON",
    422: "The job cannot be computed as given",
    500: "Something broke on our side",
    503: "Too many jobs are waiting",
}


@dataclass(frozen=True, slots=True)
class Refusal:
    """One field, and one sentence with the value and the bound. The field is empty where no field is at fault."""

    field: str
    sentence: str


def of_input_error(bad: InputError) -> Refusal:
    """The same, from a value that cannot be computed with."""
    return Refusal(FORM_NAMES.get(bad.field, bad.field), readable(bad.sentence, 600))


def problem(status: int, refusals: Sequence[Refusal], instance: str) -> dict[str, Any]:
    """The body of an error as RFC 9457 has it, with the fields at fault listed."""
    return {
        "type": "about:blank",
        "title": TITLES.get(status, "The request was refused"),
        "status": status,
        "detail": "; ".join(f"{r.field}: {r.sentence}" if r.field else r.sentence for r in refusals[:5]),
        "errors": [{"field": r.field, "sentence": r.sentence} for r in refusals],
        "instance": instance,
    }


def readable(value: object, most: int = SHOWN_CHARACTERS) -> str:
    """Text that can be sent and printed: nothing that is not a character, and not too much of it."""
    text = str(value).encode("utf-8", "replace").decode("utf-8")
    text = "".join(c if c.isprintable() else "\N{REPLACEMENT CHARACTER}" for c in text)
    return text if len(text) <= most else text[: most - 1] + "…"


def shown(value: object) -> str:
    """A value as a sentence can name it."""
    if isinstance(value, str):
        return f"“{readable(value)}”"
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, int | float):
        try:
            return readable(f"{value:g}")
        except OverflowError:
            return "a number of more than 300 digits"
    if isinstance(value, list | tuple):
        return "a list"
    if isinstance(value, dict):
        return "an object"
    return "this"


# --- pydantic's findings, told again ----------------------------------------------------------------------------------


def of_validation(errors: Iterable[Mapping[str, Any]], model: type[BaseModel]) -> list[Refusal]:
    """Refusals for pydantic's errors about `model`, in order, at most fifty."""
    told = []
    for error in errors:
        path = [step for step in error["loc"] if step not in UNION_TAGS]
        told.append(Refusal(field_name(path), _sentence(error, path, model)))
    return told[:SHOWN_ERRORS]


def field_name(path: Sequence[str | int]) -> str:
    """`own_diodes[0].forward[1].voltage_v`."""
    name = ""
    for step in path:
        name += f"[{step}]" if isinstance(step, int) else f".{readable(step)}" if name else readable(step)
    return name


def _sentence(error: Mapping[str, Any], path: Sequence[str | int], model: type[BaseModel]) -> str:
    kind, value, facts = error["type"], error.get("input"), error.get("ctx", {})
    match kind:
        case "missing":
            return _missing(path, model)
        case "extra_forbidden":
            return unknown_name(str(path[-1]), known_names(model, path[:-1]))
        case "float_parsing" | "float_type":
            return "it is empty; a number is needed" if value is None else f"{shown(value)} is not a number"
        case "int_parsing" | "int_type" | "int_from_float" | "int_parsing_size":
            return "it is empty; a whole number is needed" if value is None else f"{shown(value)} is not a whole number"
        case "finite_number":
            return f"{shown(value)} is not a finite number"
        case "literal_error":
            return _not_one_of(value, re.findall(r"'([^']*)'", str(facts.get("expected", ""))))
        case "greater_than_equal":
            return f"{shown(value)} is below the lowest value taken, {facts['ge']:g}"
        case "less_than_equal":
            return f"{shown(value)} is above the highest value taken, {facts['le']:g}"
        case "bool_parsing" | "bool_type":
            return f"{shown(value)} is neither true nor false"
        case "string_type" | "string_unicode":
            return f"{shown(value)} is not text"
        case "string_too_long":
            return f"it has {len(str(value))} characters; at most {facts['max_length']} are taken"
        case "string_too_short":
            return f"it is empty; at least {facts['min_length']} character is needed"
        case "too_long":
            return f"it has {facts['actual_length']} entries; at most {facts['max_length']} are taken"
        case "too_short":
            return f"it has {facts['actual_length']} entries; at least {facts['min_length']} are needed"
        case "list_type":
            return f"{shown(value)} is given where a list is wanted"
        case "model_type" | "model_attributes_type" | "dict_type":
            return f"{shown(value)} is given where an object with named values is wanted"
        case "value_error":
            return readable(facts.get("error", "this value cannot be used"), 200)
        case "json_invalid":
            return f"the body is not JSON: character {path[-1] if path else 0}: {readable(facts.get('error', ''), 80)}"
        case _:
            return f"{shown(value)} cannot be used here"


def _missing(path: Sequence[str | int], model: type[BaseModel]) -> str:
    parent = model_at(model, path[:-1])
    field = parent.model_fields.get(str(path[-1])) if parent and path else None
    meant = f" ({field.description[0].lower()}{field.description[1:]})" if field and field.description else ""
    return f"it is missing and has no default{meant}"


def _not_one_of(value: object, choices: Sequence[str]) -> str:
    return f"{shown(value)} is not one of {', '.join(choices)}{_close_to(str(value), choices)}"


def unknown_name(name: str, names: Sequence[str]) -> str:
    """The sentence for a name that is not known here, with the one that was probably meant."""
    return f"the name {shown(name)} is not known here{_close_to(name, names)}"


def _close_to(name: str, names: Sequence[str]) -> str:
    close = difflib.get_close_matches(name[:80], names, n=1, cutoff=0.6)
    return f"; did you mean {close[0]}?" if close else ""


def known_names(model: type[BaseModel], path: Sequence[str | int]) -> list[str]:
    """The names that the record at `path` takes."""
    found = model_at(model, path)
    return list(found.model_fields) if found else []


def model_at(model: type[BaseModel], path: Sequence[str | int]) -> type[BaseModel] | None:
    """The record that lies at `path` under `model`."""
    here: type[BaseModel] | None = model
    for step in path:
        if isinstance(step, int):
            continue
        if here is None or step not in here.model_fields:
            return None
        here = _record_in(here.model_fields[step].annotation)
    return here


def _record_in(annotation: object) -> type[BaseModel] | None:
    """The pydantic record inside `list[X]`, `X | None`, `Annotated[X, ...]`."""
    if isinstance(annotation, type) and issubclass(annotation, BaseModel):
        return annotation
    if get_origin(annotation) in (list, tuple, Union, types.UnionType, Annotated):
        for inner in get_args(annotation):
            if (found := _record_in(inner)) is not None:
                return found
    return None
