"""A part that can be chosen: the record that the rest of the program works with."""

import re
from dataclasses import dataclass

from server.catalog.datasheet import Sheet
from server.catalog.fit import Fit
from server.catalog.halves import Remark
from server.physics.diode import ActiveLaw, JunctionLaw


@dataclass(frozen=True, slots=True)
class Part:
    """One type, its ratings merged on the safe side over its sheets, and its two corners.

    The laws are per die (per leg). `if_av_a` is for one leg or for the package, as `if_av_per` says. `tj_max_c` holds
    with reverse voltage applied. `tab_live`: True where the tab or base is the cathode, False where it is isolated,
    None where the package has none. None elsewhere: not printed.
    """

    type: str
    technology: str
    package: str | None
    dies: int
    vrrm_v: float
    if_av_a: float | None
    if_av_at: str | None
    if_av_at_c: float | None
    if_av_per: str
    ifsm_a: float | None
    tj_max_c: float
    tj_max_forward_only_c: float | None
    rth_ja_c_per_w: float | None
    rth_jl_c_per_w: float | None
    rth_jc_c_per_w: float | None
    tab_live: bool | None
    sheets: tuple[Sheet, ...]
    fit: Fit | None  # None for active rectifiers, whose laws are set from printed facts
    typical: JunctionLaw | ActiveLaw
    maximum: JunctionLaw | ActiveLaw
    assumed: tuple[str, ...]
    warnings: tuple[Remark, ...]
    note: str | None = None
    family: str | None = None

    @property
    def parallel_legs(self) -> int:
        """Dies that can be used side by side: both of a common-cathode pair, two of a bridge, one of a series pair.

        MDD in a module's name stands for two diodes in series (maker's naming, from memory).
        """
        return 1 if self.type.startswith("MDD") else min(self.dies, 2)

    @property
    def key(self) -> str:
        """The type as it can stand in an address: lower case, letters, digits and hyphens."""
        return re.sub(r"[^a-z0-9]+", "-", self.type.lower()).strip("-")


@dataclass(frozen=True, slots=True)
class Unfitted:
    """A type of the catalogue that cannot be computed with, and why."""

    type: str
    technology: str
    reason: str


# Package practice, from memory: the tab, stud or base of these is the cathode unless the case is called isolated.
_ISOLATED = re.compile(r"isolated|full pack|SOT-227", re.IGNORECASE)
_CATHODE_TAB = re.compile(
    r"TO-220|TO-247|TO-252|TO-263|TO-244|TO-277|D2PAK|DPAK|I2PAK|SOT-93|DO-4|DO-5|HALF-PAK|PowerDI5", re.IGNORECASE
)
_AXIAL_DO = re.compile(r"DO-41|DO-204")


def tab_live(package: str | None) -> bool | None:
    """Whether the tab carries the cathode's potential; None where there is no tab (or no package named)."""
    if package is None:
        return None
    if _ISOLATED.search(package):
        return False
    return True if _CATHODE_TAB.search(_AXIAL_DO.sub("", package)) else None
