"""Printed points -> both corners of a junction law, typical and maximum, with misfit and every assumption in words."""

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from server.catalog.corners import limited_forward, limited_reverse, raised_maximum
from server.catalog.datasheet import ForwardPoint, ReversePoint, check_points
from server.catalog.halves import Halves, Remark, fit_halves
from server.catalog.reverse import join
from server.errors import InputError
from server.physics.diode import DiodeCells, JunctionLaw, forward_drop_v, reverse_a


@dataclass(frozen=True, slots=True)
class Misfit:
    """One printed point beside ours. `quantity` "forward": volts at `at` amperes; "reverse": amperes at `at` volts."""

    quantity: str
    at: float
    junction_c: float
    kind: str
    printed: float
    ours: float


@dataclass(frozen=True, slots=True)
class Fit:
    """Both corners, how well they meet the print, and what was assumed."""

    typical: JunctionLaw
    maximum: JunctionLaw
    misfits: tuple[Misfit, ...]
    forward_misfit_v: float  # worst |printed − ours|
    leakage_misfit_log: float  # worst |ln(printed / ours)|
    assumed: tuple[str, ...]
    warnings: tuple[Remark, ...]


def finished(halves: Halves, forward: Sequence[ForwardPoint], reverse: Sequence[ReversePoint], vrrm_v: float) -> Fit:
    """Both corners in order (typical never worse than maximum), each printed point beside ours."""
    if halves.forward_typ is None or halves.forward_max is None:
        raise InputError("forward", "no forward point with a known junction temperature: give at least one")
    if halves.reverse_typ is None or halves.reverse_max is None:
        raise InputError("reverse", "no leakage point with a known junction temperature: give at least one")
    warnings = list(halves.warnings)
    top_a = max(p.current_a for p in forward)
    forward_typ, cut_v = limited_forward(halves.forward_typ, halves.forward_max, top_a)
    if cut_v > 1e-3:
        warnings.append(
            Remark(
                "typical_drop_limited", f"typical drop lowered by {cut_v * 1e3:.0f} mV so as not to pass the maximum"
            )
        )
    try:
        maximum = join(halves.forward_max, halves.reverse_max)
        typical = join(forward_typ, halves.reverse_typ)
        printed_maximum = maximum
        if halves.typical_leakage_printed:
            maximum = raised_maximum(typical, maximum, vrrm_v)
        typical, cut_ln = limited_reverse(typical, maximum, vrrm_v)
    except InputError as bad:  # the law's own names mean nothing to who typed the points
        side = "reverse" if bad.field.startswith("leakage") else "forward"
        raise InputError(side, f"no diode passes through these points: {bad.field} {bad.sentence}") from bad
    if maximum.leakage_exponent < printed_maximum.leakage_exponent:
        warnings.append(
            Remark(
                "maximum_leakage_raised",
                f"maximum leakage below {vrrm_v:g} V raised to VR^{maximum.leakage_exponent:.2f}, so that the printed "
                "typical does not pass it",
            )
        )
    if cut_ln > 0.01:
        warnings.append(
            Remark(
                "typical_leakage_limited",
                f"typical leakage lowered by up to {-100 * np.expm1(-cut_ln):.0f} % so as not to pass the maximum",
            )
        )
    misfits = _misfits({"typ": typical, "max": maximum}, forward, reverse)
    drops = [abs(m.printed - m.ours) for m in misfits if m.quantity == "forward"]
    leaks = [abs(float(np.log(m.printed / m.ours))) for m in misfits if m.quantity == "reverse"]
    return Fit(typical, maximum, misfits, max(drops), max(leaks), halves.assumed, tuple(warnings))


def _misfits(
    corners: dict[str, JunctionLaw], forward: Sequence[ForwardPoint], reverse: Sequence[ReversePoint]
) -> tuple[Misfit, ...]:
    """Printed typical points against the typical law, printed maxima against the maximum law."""
    cells = DiodeCells.of([corners["typ"], corners["max"]])
    rows: list[Misfit] = []
    known = [p for p in forward if p.junction_c is not None]
    if known:
        at = np.array([[p.current_a] for p in known])
        ours = forward_drop_v(cells, at, np.array([[p.junction_c] for p in known], dtype=np.float64))
        for p, (typ, most) in zip(known, ours, strict=True):
            value = float(typ if p.kind == "typ" else most)
            rows.append(Misfit("forward", p.current_a, p.junction_c or 0.0, p.kind, p.voltage_v, value))
    leaks = [p for p in reverse if p.junction_c is not None]
    if leaks:
        at = np.array([[p.reverse_v] for p in leaks])
        ours = reverse_a(cells, at, np.array([[p.junction_c] for p in leaks], dtype=np.float64))
        for q, (typ, most) in zip(leaks, ours, strict=True):
            value = float(typ if q.kind == "typ" else most)
            rows.append(Misfit("reverse", q.reverse_v, q.junction_c or 0.0, q.kind, q.current_a, value))
    return tuple(rows)


def check_overrides(
    vrrm_v: float, ideality: float | None, forward_slope_v_per_k: float | None, leakage_exponent: float | None
) -> None:
    """Refuse a rating or a value in the place of a class value that no diode has."""
    if not 1.0 <= vrrm_v <= 20000.0:
        raise InputError("vrrm_v", f"{vrrm_v:g} V is outside 1 to 20000 V")
    for field, value, low, high in (
        ("ideality", ideality, 0.9, 3.0),
        ("forward_slope_v_per_k", forward_slope_v_per_k, -0.004, 0.01),
        ("leakage_exponent", leakage_exponent, 0.06, 6.0),
    ):
        if value is not None and not low <= value <= high:
            raise InputError(field, f"{value:g} is outside {low:g} to {high:g}")


def fit_points(
    technology: str,
    forward: Sequence[ForwardPoint],
    reverse: Sequence[ReversePoint],
    *,
    vrrm_v: float,
    ideality: float | None = None,
    forward_slope_v_per_k: float | None = None,
    leakage_exponent: float | None = None,
) -> Fit:
    """Both corners from one sheet's points, or from a user's: the same gate and the same rules.

    `ideality`, `forward_slope_v_per_k` (of the whole drop, at every given current) and `leakage_exponent` replace
    the class values and are then met exactly.

    Raises:  InputError for points that no diode has, or where a side has no point at all.
    """
    check_overrides(vrrm_v, ideality, forward_slope_v_per_k, leakage_exponent)
    check_points(forward, reverse, vrrm_v)
    halves = fit_halves(
        technology,
        forward,
        reverse,
        ideality=ideality,
        forward_slope_v_per_k=forward_slope_v_per_k,
        leakage_exponent=leakage_exponent,
    )
    return finished(halves, forward, reverse, vrrm_v)
