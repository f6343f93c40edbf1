"""Invented jets as a user writes them, for the tests of this room."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

FLUX = {"mjy": 200, "on": "2026-10-01", "ghz": 43, "fades": {"exponential_days": 300}}
CROSSING = {"date": "2026-06-10", "sigma_days": 20, "at_ghz": 43}
SPEED = {"lognormal": {"median": 0.3, "sigma_fraction": 0.2}}
TURN = {"normal": {"mean": -62, "sigma": 4}}
NOZZLE = {
    "period_days": {"lognormal": {"median": 162, "sigma_fraction": 0.02}},
    "half_angle_deg": {"truncated_normal": {"mean": 20, "sigma": 1, "low": 10, "high": 30}},
    "inclination_deg": {"normal": {"mean": 79, "sigma": 1}},
    "axis_pa_deg": {"normal": {"mean": 98, "sigma": 2}},
    "phase_deg": {"normal": {"mean": 40, "sigma": 10}},
    "phase_on": "2026-09-01",
    "beta": {"normal": {"mean": 0.26, "sigma": 0.005}},
}

APPARENT = {"core_crossing": CROSSING, "speed_mas_yr": SPEED, "pa_deg": TURN}
LINEAR = {
    "passes": {
        "on": "2026-11-01",
        "east_mas": {"normal": {"mean": -0.3, "sigma": 0.02}},
        "north_mas": {"normal": {"mean": 0.2, "sigma": 0.02}},
    },
    "speed_mas_yr": SPEED,
    "pa_deg": {"normal": {"mean": 20, "sigma": 5}},
}
INTRINSIC = {
    "core_crossing": CROSSING,
    "pa_deg": TURN,
    "intrinsic": {
        "lorentz_factor": {"lognormal": {"median": 12, "sigma_fraction": 0.2}},
        "angle_deg": {"lognormal": {"median": 5, "sigma_fraction": 0.3}},
    },
}
PRECESSING = {"nozzle": NOZZLE, "ejection": {"date": "2026-10-20", "sigma_days": 3}}
STATIONARY = {"stationary": {"separation_mas": {"lognormal": {"median": 0.4, "sigma_fraction": 0.1}}, "pa_deg": TURN}}


def knot(name: str, motion: Mapping[str, Any], **more: Any) -> dict[str, Any]:
    return {"knot": name, "motion": dict(motion), "flux": FLUX, **more}


def pair(name: str, **more: Any) -> dict[str, Any]:
    motion = {
        "ejection": {"date": "2026-11-26", "sigma_days": 1.5},
        "approaching_mas_d": {"lognormal": {"median": 18, "sigma_fraction": 0.12}},
        "receding_mas_d": {"lognormal": {"median": 9.5, "sigma_fraction": 0.15}},
        "pa_deg": {"normal": {"mean": 141, "sigma": 3}},
        **more.pop("motion", {}),
    }
    flux = {"mjy": 260, "on": "2026-12-01", "ghz": 22, "fades": {"exponential_days": 40}, **more.pop("flux", {})}
    return {"pair": name, "motion": motion, "flux": flux, **more}


FAR = {"distance_pc": {"lognormal": {"median": 5000, "sigma_fraction": 0.1}}}

# Every kind of trajectory, each with a target that it fits.
KINDS: dict[str, tuple[list[dict[str, Any]], dict[str, Any]]] = {
    "apparent": ([knot("A", APPARENT)], {}),
    "apparent at a distance": ([knot("A", APPARENT)], FAR),
    "linear": ([knot("L", LINEAR)], {}),
    "intrinsic": ([knot("I", INTRINSIC)], {}),
    "intrinsic at a distance": (
        [knot("I", {**INTRINSIC, "intrinsic": {"beta": {"normal": {"mean": 0.9, "sigma": 0.01}}, "angle_deg": 60}})],
        FAR,
    ),
    "counter-knot": ([knot("I", INTRINSIC), knot("C", {"side": "receding", "of": "I"})], {}),
    "nozzle": (
        [knot("N1", PRECESSING), knot("N2", {"nozzle": "N1", "ejection": {"date": "2026-11-20", "sigma_days": 3}})],
        FAR,
    ),
    "nozzle counter-knot": ([knot("C", {"side": "receding", "of": "N"}), knot("N", PRECESSING)], FAR),
    "stationary": ([knot("S", STATIONARY)], {}),
    "pair": ([pair("P")], FAR),
}
