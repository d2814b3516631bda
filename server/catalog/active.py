"""Active rectifiers: a controller's printed facts joined with a switch's, as two corners of an ActiveLaw."""

from collections.abc import Mapping, Sequence

import numpy as np

from server.catalog.classes import COLD_RATIO, HOT_RATIO, LEAKAGE_EXPONENT
from server.catalog.datasheet import DiodeType, Sheet
from server.catalog.part import Part, Unfitted, tab_live
from server.catalog.reverse import heat_exponent
from server.physics.diode import ActiveLaw

# Channel resistance of a silicon power MOSFET grows about 1.9-fold from 25 to 150 °C. From memory (makers' normalised
# curves); none is printed on the sheets of this catalogue.
RDS_RISE_PER_K = 0.007
# Typical over maximum RDS(on): 4.8 over 6 milliohm on the IRFP4310Z sheet, the only one here that prints both.
RDS_RATIO = 0.8
# The blocking junction of a MOSFET is a pn junction: the class energy of silicon pn, as in `classes`.
BODY_LEAKAGE_EV = 0.55
# Typical over maximum supply current: 80 over 130 microampere on the LM74700-Q1 sheet, the only one that prints both.
SUPPLY_RATIO = 0.615

# Where a controller's own limit is not printed: that of its two sisters here.
CONTROLLER_MAX_C = 125.0

CONTROLLERS = ("LM74700-Q1", "LTC4359", "LM74610-Q1")
SWITCHES = ("IRF1010N", "IRFP4310Z")
INTEGRATED = "SM74611"
P_CHANNEL = "LTC4412"
LEAKAGE_FROM = "IRF1010N"  # the only switch here whose drain leakage is printed


def _facts(types: Sequence[DiodeType], name: str) -> tuple[DiodeType, Sheet, Mapping[str, float]]:
    item = next(item for item in types if item.type == name)
    facts = item.sheets[0].active
    if facts is None:
        raise ValueError(f"diodes.toml, {name}: an active entry without its facts")
    return item, item.sheets[0], facts


def _switch_leakage(facts: Mapping[str, float], blocking_v: float) -> tuple[tuple[float, float], tuple[float, float]]:
    """(A at 25 °C and `blocking_v`, eV), typical then maximum, from the cold and hot maxima of the drain leakage."""
    cold_v, hot_v = facts["i_dss_25c_v_ds_v"], facts["i_dss_150c_v_ds_v"]
    cold_a = facts["i_dss_25c_max_a"]
    hot_a = facts["i_dss_150c_max_a"] * (cold_v / hot_v) ** LEAKAGE_EXPONENT
    x_hot = float(heat_exponent(150.0))
    maximum = (cold_a, float(np.log(hot_a / cold_a)) / x_hot)
    typical = (hot_a * HOT_RATIO["all"] * float(np.exp(-BODY_LEAKAGE_EV * x_hot)), BODY_LEAKAGE_EV)
    return typical, maximum


def _pair(types: Sequence[DiodeType], controller_name: str, switch_name: str) -> Part:
    _, control_sheet, control = _facts(types, controller_name)
    switch, switch_sheet, fet = _facts(types, switch_name)
    limits_v = [control["v_reverse_max_v"], fet["v_ds_max_v"], control.get("v_in_max_v", np.inf)]
    vrrm_v = float(min(limits_v))
    tj_max_c = min(fet["t_junction_max_c"], control.get("t_ambient_max_c", CONTROLLER_MAX_C))
    assumed = [
        f"channel resistance grows by {RDS_RISE_PER_K * 100:.1f} %/K (from memory)",
        f"drain leakage grows as VDS^{LEAKAGE_EXPONENT:g} (engineering estimate)",
        f"typical drain leakage: {HOT_RATIO['all']:g} of the hot maximum, cooled by {BODY_LEAKAGE_EV:g} eV: class "
        "values of this catalogue, silicon pn",
        "no average current is printed: heat and junction limit decide",
        f"junction limit {tj_max_c:g} °C: the lower of the switch's and the controller's ({CONTROLLER_MAX_C:g} °C "
        "where the latter is not printed)",
    ]
    leak = fet
    if "i_dss_25c_max_a" not in fet:
        _, _, leak = _facts(types, LEAKAGE_FROM)
        assumed.append(f"drain leakage of {switch_name} is not printed: that of {LEAKAGE_FROM} stands for it")
    typical_leak, maximum_leak = _switch_leakage(leak, vrrm_v)
    rds_max_ohm = fet["r_ds_on_max_ohm"]
    rds_typ_ohm = fet.get("r_ds_on_typ_ohm")
    if rds_typ_ohm is None:
        rds_typ_ohm = RDS_RATIO * rds_max_ohm
        assumed.append(f"typical channel resistance: {RDS_RATIO:g} of the maximum, as on the IRFP4310Z sheet")
    if "v_forward_regulated_v" in control:
        regulated_v = control["v_forward_regulated_v"]
    else:
        _, _, sister = _facts(types, INTEGRATED)
        regulated_v = sister["v_forward_average_typ_v"]
        assumed.append(
            f"{controller_name} lets the body diode conduct now and then to refresh its gate; the mean drop is not "
            f"printed: {regulated_v * 1e3:.0f} mV as printed for {INTEGRATED}, built on the same principle"
        )
    supply_typ_a = control["i_q_operating_typ_a"]
    supply_max_a = control.get("i_q_operating_max_a")
    if supply_max_a is None:
        supply_max_a = supply_typ_a / SUPPLY_RATIO
        if supply_typ_a > 0:
            assumed.append(f"maximum supply current: typical over {SUPPLY_RATIO:g}, as on the LM74700-Q1 sheet")
    turnoff_v = control.get("v_reverse_threshold_typ_v")
    if turnoff_v is None:
        turnoff_v = 0.0
        assumed.append("reverse turn-off threshold is not printed: 0 mV stands for it")

    if supply_typ_a > 0:
        assumed.append("its supply is counted as drawn from the bank day and night, the unfavourable case")

    def law(rds_ohm: float, leakage: tuple[float, float], supply_a: float) -> ActiveLaw:
        return ActiveLaw(
            regulated_v=regulated_v,
            rds_on_ohm=rds_ohm,
            rds_on_per_k=RDS_RISE_PER_K,
            leakage_a=leakage[0],
            leakage_ref_v=leak["i_dss_25c_v_ds_v"],
            leakage_exponent=LEAKAGE_EXPONENT,
            leakage_ev=leakage[1],
            supply_a=supply_a,
            turnoff_v=turnoff_v,
        )

    return Part(
        type=f"{controller_name} + {switch_name}",
        technology="active",
        package=switch.package,
        dies=1,
        vrrm_v=vrrm_v,
        if_av_a=None,
        if_av_at=None,
        if_av_at_c=None,
        if_av_per="package",
        ifsm_a=None,
        tj_max_c=tj_max_c,
        tj_max_forward_only_c=None,
        rth_ja_c_per_w=None,
        rth_jl_c_per_w=None,
        rth_jc_c_per_w=None,
        tab_live=tab_live(switch.package),
        sheets=(control_sheet, switch_sheet),
        fit=None,
        typical=law(rds_typ_ohm, typical_leak, supply_typ_a),
        maximum=law(rds_max_ohm, maximum_leak, supply_max_a),
        assumed=tuple(assumed),
        warnings=(),
        note="; ".join(note for note in (control_sheet.note, switch_sheet.note) if note) or None,
    )


def _integrated(types: Sequence[DiodeType]) -> Part:
    item, sheet, facts = _facts(types, INTEGRATED)
    drop_v, at_a = facts["v_forward_average_typ_v"], facts["v_forward_average_at_a"]
    vrrm_v, hottest_c = facts["v_reverse_max_v"], facts["t_junction_max_c"]
    cold_a, hot_a = facts["i_reverse_typ_a"], facts["i_reverse_hot_typ_a"]
    energy_ev = float(np.log(hot_a / cold_a) / heat_exponent(hottest_c))

    def law(rds_ohm: float, leakage_a: float, leakage_ev: float) -> ActiveLaw:
        return ActiveLaw(
            regulated_v=drop_v,
            rds_on_ohm=rds_ohm,
            rds_on_per_k=RDS_RISE_PER_K,
            leakage_a=leakage_a,
            leakage_ref_v=vrrm_v,
            leakage_exponent=LEAKAGE_EXPONENT,
            leakage_ev=leakage_ev,
            supply_a=0.0,
            turnoff_v=0.0,
        )

    hot_max_a, cold_max_a = hot_a / HOT_RATIO["all"], cold_a / COLD_RATIO["all"]
    max_ev = float(np.log(hot_max_a / cold_max_a) / heat_exponent(hottest_c))
    return Part(
        type=item.type,
        technology="active",
        package=item.package,
        dies=1,
        vrrm_v=vrrm_v,
        if_av_a=facts["i_forward_max_a"],
        if_av_at=None,
        if_av_at_c=None,
        if_av_per="package",
        ifsm_a=None,
        tj_max_c=hottest_c,
        tj_max_forward_only_c=None,
        rth_ja_c_per_w=None,
        rth_jl_c_per_w=None,
        rth_jc_c_per_w=None,
        tab_live=tab_live(item.package),
        sheets=(sheet,),
        fit=None,
        typical=law(drop_v / at_a, cold_a, energy_ev),
        maximum=law(drop_v / at_a / RDS_RATIO, cold_max_a, max_ev),
        assumed=(
            f"the printed mean drop of {drop_v * 1e3:.0f} mV at {at_a:g} A holds at lower currents too, and grows in "
            "proportion above",
            f"the hot leakage is printed without its temperature: taken for {hottest_c:g} °C, and at {vrrm_v:g} V",
            f"maximum leakage: typical over {COLD_RATIO['all']:g} cold and {HOT_RATIO['all']:g} hot; maximum channel "
            f"resistance: typical over {RDS_RATIO:g}",
            f"channel resistance grows by {RDS_RISE_PER_K * 100:.1f} %/K (from memory)",
            "it feeds itself from its own drop: no supply current from the bank",
        ),
        warnings=(),
        note=sheet.note,
    )


def active_parts(types: Sequence[DiodeType]) -> tuple[tuple[Part, ...], tuple[Unfitted, ...]]:
    """Every controller with every switch of the catalogue, the integrated one, and what cannot be paired."""
    present = {item.type for item in types if item.technology == "active"}
    pairs = [_pair(types, c, s) for c in CONTROLLERS for s in SWITCHES if {c, s} <= present]
    if INTEGRATED in present:
        pairs.append(_integrated(types))
    alone = []
    for item in types:
        if item.technology != "active" or item.type in (*CONTROLLERS, INTEGRATED):
            continue
        if item.type in SWITCHES:
            reason = "a switch alone: listed together with each controller"
        elif item.type == P_CHANNEL:
            reason = "its switch must be a P-channel MOSFET, and this catalogue holds none"
        else:
            reason = "no pairing is known for it"
        alone.append(Unfitted(item.type, item.technology, reason))
    alone += [Unfitted(name, "active", "a controller alone: listed together with each switch") for name in CONTROLLERS]
    return tuple(pairs), tuple(alone)
