"""All there is to say about one type, found by its name: what is printed, our curves, a night's drain, parameters."""

import difflib
import functools
import re
from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np

from server.catalog import parts
from server.catalog.datasheet import DiodeType, load_types
from server.catalog.part import Part, Unfitted
from server.physics.diode import ActiveLaw
from server.web import diode_figures as figures
from server.web.diode_figures import Figure, Sampled, Table
from server.web.diode_words import Parameter, parameters
from server.web.printed import Point, printed_points

# --- by name ----------------------------------------------------------------------------------------------------------


def slug(type_name: str) -> str:
    """As `Part.key`, for types that are no part."""
    return re.sub(r"[^a-z0-9]+", "-", type_name.lower()).strip("-")


@dataclass(frozen=True, slots=True)
class LeftOut:
    """A type that cannot be computed with, and all that is printed about it."""

    key: str
    item: DiodeType
    reason: str
    partners: tuple[Part, ...]
    """Parts that it is half of."""


def _left_out(one: Unfitted) -> LeftOut:
    item = next(item for item in load_types() if item.type == one.type)
    partners = tuple(part for part in parts.load_parts() if one.type in part.type.split(" + "))
    return LeftOut(slug(one.type), item, one.reason, partners)


@functools.cache
def _names() -> Mapping[str, Part | LeftOut]:
    found: dict[str, Part | LeftOut] = {}
    for one in parts.unfitted():
        left_out = _left_out(one)
        found |= {left_out.key: left_out, one.type.casefold(): left_out}
    for part in parts.load_parts():
        found |= {part.key: part, part.type.casefold(): part}
    return found


def named(name: str) -> Part | LeftOut | None:
    """The part, or the type left out, of that key or type, in any case."""
    wanted = name.strip().casefold()
    return _names().get(wanted) or _names().get(slug(wanted))


def close_to(name: str) -> list[str]:
    """Types whose names come close, the nearest first."""
    return [type_name for _, type_name in offers(name)]


def offers(name: str) -> list[tuple[str, str]]:
    """Keys and types whose names come close, the nearest first."""
    near = difflib.get_close_matches(name.strip().casefold()[:80], list(_names()), n=6, cutoff=0.55)
    found = [_names()[one] for one in near]
    pairs = [(one.key, one.type if isinstance(one, Part) else one.item.type) for one in found]
    return list(dict.fromkeys(pairs))[:3]


# --- the page ---------------------------------------------------------------------------------------------------------


@dataclass(frozen=True, slots=True)
class Told:
    """One part, as its page shows it."""

    part: Part
    points: tuple[Point, ...]
    drop: Figure
    leakage: Figure
    heat: Figure
    night: Table
    parameters: tuple[Parameter, ...]
    drops: Sampled
    leaks: Sampled
    heats: Sampled
    nights: Sampled
    supply_mah: tuple[float, float] | None
    """Of an active rectifier: what its controller takes in a night, typical and maximum."""


@functools.lru_cache(maxsize=128)
def told(key: str) -> Told:
    """All of one part; raises KeyError for a key that no part has."""
    part = _names()[key]
    if not isinstance(part, Part):
        raise KeyError(key)
    points = printed_points(part.sheets, part)
    laws = (part.typical, part.maximum)
    supply = tuple(1e3 * figures.NIGHT_H * law.supply_a for law in laws if isinstance(law, ActiveLaw))
    drawn = figures.drops(part, np.geomspace(*figures.currents(part), figures.CURVE_POINTS))
    leaking = figures.leaks(part, np.geomspace(figures.LOWEST_SEEN_V, part.vrrm_v, figures.CURVE_POINTS))
    warming = figures.leaks_over_temperature(part, np.linspace(*figures.OVER_C, 41))
    night = figures.nights(part)
    return Told(
        part=part,
        points=points,
        drop=figures.drop_figure(part, points, drawn),
        leakage=figures.leak_figure(part, points, leaking),
        heat=figures.heat_figure(part, warming),
        night=figures.night_table(night),
        drops=drawn,
        leaks=leaking,
        heats=warming,
        nights=night,
        parameters=parameters(part),
        supply_mah=(supply[0], supply[1]) if supply else None,
    )
