"""One sheet's columns -> the four half-laws, forward and reverse, typical and maximum; every assumption in words.

The maximum half passes through the printed maxima, cold and hot. The typical half passes through printed typical
points; where there are none it hangs on the HOT maximum and cools by the class's activation energy, because a cold
maximum is the limit of a quick test, not a property of the part.
"""

from collections.abc import Sequence
from dataclasses import dataclass

from server.catalog.classes import CLASSES, HOT_C, LEAKAGE_EXPONENT, LEAKAGE_EXPONENT_SOURCE, ClassValues
from server.catalog.datasheet import ForwardPoint, ReversePoint
from server.catalog.forward import (
    EXACT_SD_V,
    HOT_SPAN_K,
    PRINTED_SD_V,
    ForwardFit,
    class_prior,
    column_prior,
    fit_forward,
)
from server.catalog.reverse import Points, ReverseFit, fit_reverse, several_temperatures, several_voltages
from server.errors import InputError

# A typical drop is taken below its maximum by the class's offset, but by no more than this share of the drop.
MAX_OFFSET_SHARE = 0.25


@dataclass(frozen=True, slots=True)
class Remark:
    """Something the reader must know about a fit: a code for programs, a sentence for people."""

    code: str
    sentence: str


@dataclass(frozen=True, slots=True)
class Halves:
    """The four half-laws of one sheet; None where it prints no point of that side."""

    forward_typ: ForwardFit | None
    forward_max: ForwardFit | None
    reverse_typ: ReverseFit | None
    reverse_max: ReverseFit | None
    assumed: tuple[str, ...]
    warnings: tuple[Remark, ...] = ()
    typical_leakage_printed: bool = False


def class_values(technology: str) -> ClassValues:
    """Class values of a junction technology. Raises InputError for any other."""
    if technology not in CLASSES:
        raise InputError("technology", f"{technology!r} is none of {', '.join(CLASSES)}")
    return CLASSES[technology]


def _forward_halves(
    values: ClassValues,
    points: Sequence[ForwardPoint],
    ideality: float | None,
    slope_v_per_k: float | None,
    sister: ForwardFit | None,
) -> tuple[ForwardFit, ForwardFit, list[str], list[Remark]]:
    """Typical and maximum forward law of one sheet. The column that says more is fitted first and guides the other.

    `sister` is the law of another sheet of the same type that says more: it guides a column with one current or one
    temperature in the place of the class.
    """
    columns = {
        kind: tuple(
            (p.current_a, p.voltage_v, p.junction_c) for p in points if p.kind == kind and p.junction_c is not None
        )
        for kind in ("max", "typ")
    }

    def says(kind: str) -> tuple[int, int]:
        return len({c for _, _, c in columns[kind]}), len(columns[kind])

    order = sorted((kind for kind in columns if columns[kind]), key=says, reverse=True)
    assumed: list[str] = []
    warnings: list[Remark] = []
    fits: dict[str, ForwardFit] = {}
    for kind in order:
        column = columns[kind]
        one_current = len({i for i, _, _ in column}) == 1
        one_temperature = not several_temperatures(column)
        exact = slope_v_per_k is not None and one_temperature
        if exact and slope_v_per_k is not None:
            twin = [HOT_SPAN_K if c <= 60 else -HOT_SPAN_K for _, _, c in column]
            column += tuple((i, v + slope_v_per_k * d, c + d) for (i, v, c), d in zip(column, twin, strict=True))
        sd_v = EXACT_SD_V if exact else PRINTED_SD_V
        guide = next(iter(fits.values()), sister if one_current or one_temperature else None)
        side = kind if fits else None
        if guide is not None and not exact:
            fits[kind] = fit_forward(column, column_prior(guide, min(i for i, _, _ in column), side), sd_v)
            continue
        if slope_v_per_k is not None and not one_temperature:
            warnings.append(Remark("slope_not_used", f"the {kind} drops already give two temperatures; slope not used"))
        prior = class_prior(
            values,
            one_current=one_current,
            one_temperature=one_temperature and not exact,
            ideality=ideality,
            exact=exact,
        )
        fits[kind] = fit_forward(column, prior, sd_v)
        if one_current:
            assumed.append(
                f"one forward current is printed: ideality {prior.ideality.value:g} and a series drop of "
                f"{values.series_drop_v * 1e3:.0f} mV there are the {values.words} class values"
            )
        elif ideality is None:
            assumed.append(f"ideality is held near {values.ideality:g}, the {values.words} class value")
        if one_temperature and not exact:
            assumed.append(f"drop is printed at one temperature: slope {values.slope_source}")
    if "typ" not in fits:
        first_a = min(i for i, _, _ in columns["max"])
        printed_v = float(fits["max"].drop_v(first_a, 25.0))
        offset_v = min(values.drop_offset_v, MAX_OFFSET_SHARE * printed_v)
        fits["typ"] = fits["max"].lowered(offset_v, first_a)
        assumed.append(
            f"no typical drop is printed: taken {offset_v * 1e3:.0f} mV below the maximum at {first_a:g} A, "
            "the median of the sheets of this catalogue that print both"
        )
    if "max" not in fits:
        fits["max"] = fits["typ"]
        assumed.append("no maximum drop is printed: the typical drop stands for it")
    return fits["typ"], fits["max"], assumed, warnings


def _reverse_halves(
    values: ClassValues,
    points: Sequence[ReversePoint],
    forward: tuple[ForwardFit | None, ForwardFit | None],
    leakage_exponent: float | None,
) -> tuple[ReverseFit, ReverseFit, list[str]]:
    """Typical and maximum leakage of one sheet; the ratios and energies of the class fill what it leaves out."""
    columns: dict[str, Points] = {
        kind: tuple(
            (p.reverse_v, p.current_a, p.junction_c) for p in points if p.kind == kind and p.junction_c is not None
        )
        for kind in ("typ", "max")
    }
    assumed: list[str] = []
    typ, most = columns["typ"], columns["max"]
    top_v = max(v for v, _, _ in (*typ, *most))
    hot_typ = tuple((v, i / values.hot_ratio, c) for v, i, c in typ if c >= HOT_C and v == top_v)
    energy = {
        kind: None if column and several_temperatures(column) else values.leakage_ev for kind, column in columns.items()
    }
    if not typ:
        hot = tuple((v, i * values.hot_ratio, c) for v, i, c in most if c >= HOT_C)
        typ = hot or tuple((v, i * values.cold_ratio, c) for v, i, c in most)
        energy["typ"] = values.leakage_ev
        ratio, where = (values.hot_ratio, "hot") if hot else (values.cold_ratio, "cold")
        assumed.append(
            f"no typical leakage is printed: {ratio:g} of the {where} maximum, the median of the sheets of this "
            f"catalogue that print both, and an activation energy of {values.leakage_ev_source}"
        )
    elif energy["typ"] is not None:
        assumed.append(f"typical leakage is printed at one temperature: activation energy {values.leakage_ev_source}")
    if not most:
        most = tuple((v, i / (values.hot_ratio if c >= HOT_C else values.cold_ratio), c) for v, i, c in typ)
        energy["max"] = energy["typ"]
        assumed.append(
            f"no maximum leakage is printed: typical over {values.cold_ratio:g} cold and {values.hot_ratio:g} hot, "
            "the medians of the sheets of this catalogue that print both"
        )
    elif energy["max"] is not None and hot_typ and all(c < HOT_C for _, _, c in most):
        most += hot_typ
        energy["max"] = None
        assumed.append(
            f"no hot maximum of leakage is printed: the hot typical over {values.hot_ratio:g}, the median of the "
            "sheets of this catalogue that print both"
        )
    elif energy["max"] is not None:
        assumed.append(f"maximum leakage is printed at one temperature: activation energy {values.leakage_ev_source}")

    exponent = LEAKAGE_EXPONENT if leakage_exponent is None else leakage_exponent
    own = {"typ": several_voltages(typ), "max": several_voltages(most)}
    if leakage_exponent is None and not any(own.values()):
        assumed.append(f"leakage is printed at one voltage: growth as VR^{exponent:g}, {LEAKAGE_EXPONENT_SOURCE}")
    found: dict[str, ReverseFit] = {}
    for kind in sorted(own, key=lambda kind: not own[kind]):  # the column with several voltages first
        column, law = (typ, forward[0]) if kind == "typ" else (most, forward[1])
        free = own[kind] and leakage_exponent is None
        if not free and found and leakage_exponent is None:
            # The same die: the other column's exponent, but a maximum never falls faster than the class does.
            other = next(iter(found.values())).leakage_exponent
            exponent = other if kind == "typ" else min(other, LEAKAGE_EXPONENT)
        sd = values.leakage_exponent_sd if free else None
        found[kind] = fit_reverse(column, law, top_v, energy[kind], exponent, sd)
    return found["typ"], found["max"], assumed


def fit_halves(
    technology: str,
    forward: Sequence[ForwardPoint],
    reverse: Sequence[ReversePoint],
    *,
    ideality: float | None = None,
    forward_slope_v_per_k: float | None = None,
    leakage_exponent: float | None = None,
    sister: ForwardFit | None = None,
) -> Halves:
    """What one sheet can tell, each side alone; None for a side without points. For `sister` see `_forward_halves`."""
    values = class_values(technology)
    assumed: list[str] = []
    warnings: list[Remark] = []
    printed = any(p.kind == "typ" and p.junction_c is not None for p in reverse)
    forward_typ = forward_max = None
    reverse_typ = reverse_max = None
    if any(p.junction_c is not None for p in forward):
        forward_typ, forward_max, words, remarks = _forward_halves(
            values, forward, ideality, forward_slope_v_per_k, sister
        )
        assumed += words
        warnings += remarks
    if any(p.junction_c is not None for p in reverse):
        reverse_typ, reverse_max, words = _reverse_halves(values, reverse, (forward_typ, forward_max), leakage_exponent)
        assumed += words
    return Halves(forward_typ, forward_max, reverse_typ, reverse_max, tuple(assumed), tuple(warnings), printed)
