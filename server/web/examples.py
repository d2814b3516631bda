"""One worked example for each address of the API, as the page about it shows them."""

import json
from dataclasses import dataclass
from typing import Any

from server.web.form import DEMO
from server.web.schemas import inputs_of, query_of


@dataclass(frozen=True, slots=True)
class Example:
    """An address, what it is for, and a request that works."""

    method: str
    path: str
    words: str
    body: str = ""
    query: str = ""
    answer: str = ""


def _pretty(value: object) -> str:
    return json.dumps(value, indent=2, ensure_ascii=False)


OWN_DIODE: dict[str, Any] = {
    "name": "drawer find, 3 A",
    "technology": "schottky",
    "vrrm_v": 40,
    "forward": [{"current_a": 1, "voltage_v": 0.37}, {"current_a": 3, "voltage_v": 0.475}],
    "reverse": [
        {"reverse_v": 40, "current_a": 0.0001},
        {"reverse_v": 40, "current_a": 0.005, "junction_c": 100},
        {"reverse_v": 40, "current_a": 0.02, "junction_c": 100, "kind": "max"},
    ],
    "if_av_a": 3,
    "tj_max_c": 125,
    "rth_ja_c_per_w": 40,
}

LOOP_BODY: dict[str, Any] = {
    "string": {
        "single_diode": {
            "photo_a": 8.2144,
            "saturation_a": 9.825e-8,
            "slope_v": 1.8036,
            "series_ohm": 0.221,
            "shunt_ohm": 415.405,
        },
        "dark_shunt_ohm": None,
    },
    "diodes": ["none", "MBR1045", "10A10"],
    "loop_ohm": 0.05,
    "battery_v": 25.2,
    "poa_w_m2": [1000, 400, 0],
    "cell_c": [25, 25, 10],
}

EXAMPLES = (
    Example(
        "POST",
        "/api/v1/job",
        "Judges one job. The body has the form’s names; whatever is left out takes the form’s default. The answer "
        "holds the verdict, every candidate with typical and maximum ledgers by month, all checks, cautions, "
        "assumptions, the energy audit and links. Here with a part of one’s own beside three from the catalogue.",
        body=_pretty(inputs_of(DEMO) | {"candidates": ["10SQ050", "MBR1045", "10A10"], "own_diodes": [OWN_DIODE]}),
        answer='{"engine_version": …, "inputs": {…}, "verdict": {"kind": "fit_part", "sentence": …}, "facts": {…}, …}',
    ),
    Example(
        "GET",
        "/job.json",
        "The same by address: a page’s address with .json after /job. Records go in as JSON text, lists as text.",
        query=query_of(DEMO),
    ),
    Example(
        "POST",
        "/api/v1/loop",
        "The bare circuit, without days or verdict: one string, a series diode, a resistance and a bank, solved row by "
        "row. “none” is a plain wire, “perfect” a valve without drop or leakage. A dark shunt of null leaves the unlit "
        "module without one.",
        body=_pretty(LOOP_BODY),
        answer='{"rows": 3, "not_converged": 0, "diodes": [{"name": "none", "current_a": [7.83, …], …}, …]}',
    ),
    Example(
        "GET",
        "/api/v1/diodes",
        "The catalogue: ratings, every printed point beside the fitted law, sources, assumptions, and the types that "
        "could not be fitted with the reason. /diodes.json is the same.",
        answer='{"engine_version": …, "parts": [{"key": "1n5822", "type": "1N5822", "ratings": {…}, …}, …], …}',
    ),
    Example("GET", "/healthz", "Whether the service is up.", answer='{"status": "ok", "version": …}'),
    Example("GET", "/api/openapi.json", "The same in machine-readable form."),
)
