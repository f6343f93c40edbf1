"""Invented campaigns for the tests of this room."""

from __future__ import annotations

import datetime as dt
from collections.abc import Mapping, Sequence
from types import SimpleNamespace
from typing import Any

import pytest

from planner.campaign.records import (
    AnySite,
    ArraySite,
    Campaign,
    CampaignFile,
    SetupRef,
    Site,
    Source,
    SpacecraftSite,
    Target,
)

CLEAR = {"clear": [0.7] * 12}


def site(**changes: Any) -> Site:
    """An invented mountain site with one telescope and one camera."""
    setup = changes.pop("camera", {})
    shutdowns = changes.pop("shutdowns", [])
    data: dict[str, Any] = {
        "site": "Test Ridge",
        "invented": True,
        "longitude_deg": -70.4,
        "latitude_deg": -24.6,
        "height_m": 2600,
        "time_zone": "America/Santiago",
        "months": CLEAR,
        "telescopes": {"one": {"shutdowns": shutdowns, "setups": {"cam": {"aperture_m": 1.0, **setup}}}},
    }
    return Site.model_validate({**data, **changes})


def array(**changes: Any) -> ArraySite:
    """An invented array of three stations."""
    stations = [
        {"station": "A", "longitude_deg": -110, "latitude_deg": 34, "height_m": 2000, "sefd_jy": {"q": 1000}},
        {"station": "B", "longitude_deg": -100, "latitude_deg": 31, "height_m": 1500, "sefd_jy": {"q": 2000}},
        {"station": "C", "longitude_deg": -75, "latitude_deg": 41, "height_m": 300, "sefd_jy": {"q": 1500}},
    ]
    data: dict[str, Any] = {
        "array": "Test array",
        "invented": True,
        "stations": stations,
        "least_stations": 3,
        "receivers": {"q": {"ghz": 43.0, "bandwidth_mhz": 256, "look_hours": 4.0}},
        "months": CLEAR,
    }
    return ArraySite.model_validate({**data, **changes})


def target(name: str, ra: float, dec: float, **position: float) -> Target:
    """A target with one knot."""
    return Target.model_validate(
        {
            "target": name,
            "invented": True,
            "position": {"ra": ra, "dec": dec, **position},
            "redshift": 0.3,
            "source": Source(path=f"{name}.yaml"),
            "features": [
                {
                    "knot": f"{name} K1",
                    "motion": {
                        "core_crossing": {"date": "2026-06-10", "sigma_days": 60, "at_ghz": 43},
                        "speed_mas_yr": {"lognormal": {"median": 0.3, "sigma_fraction": 0.2}},
                        "pa_deg": 10,
                    },
                    "flux": {"mjy": 100, "on": "2026-10-01", "ghz": 43, "fades": {"exponential_days": 300}},
                }
            ],
        }
    )


def campaign(
    sites: Mapping[str, AnySite],
    targets: Sequence[Target],
    first: str,
    last: str,
    allocations: Sequence[tuple[str, str]] = (("ridge/cam", "all"),),
    programmes: Mapping[str, Sequence[str]] | None = None,
) -> Campaign:
    """A campaign; programmes: name -> target names (default: all targets in "all")."""
    groups = programmes or {"all": [t.name for t in targets]}
    file = CampaignFile.model_validate(
        {
            "campaign": "Invented",
            "invented": True,
            "season": {"from": first, "to": last},
            "seed": 1,
            "programmes": [{"name": n, "targets": [f"{t}.yaml" for t in ts]} for n, ts in groups.items()],
            "allocations": [{"setup": s, "programme": p, "hours": 10} for s, p in allocations],
        }
    )
    names = dict.fromkeys(setup for setup, _ in allocations)
    return Campaign(".", file, tuple(targets), sites, tuple(_setup(name, sites) for name in names))


def _setup(name: str, sites: Mapping[str, AnySite]) -> SetupRef:
    slug, part = name.split("/")
    place = sites[slug]
    if isinstance(place, ArraySite):
        return SetupRef(name, slug, place, slug, receiver=place.receivers[part], receiver_name=part)
    if isinstance(place, SpacecraftSite):
        return SetupRef(name, slug, place, slug, camera=place.setups[part])
    for telescope, record in place.telescopes.items():
        if part in record.setups:
            return SetupRef(
                name,
                slug,
                place,
                f"{slug}/{telescope}",
                camera=record.setups[part],
                shutdowns=record.shutdowns,
                busy=record.busy,
                mounted=record.mounted.get(part),
            )
    raise KeyError(name)


def dates(first: str, count: int) -> list[dt.date]:
    """Consecutive dates."""
    day = dt.date.fromisoformat(first)
    return [day + dt.timedelta(days=i) for i in range(count)]


@pytest.fixture(scope="session")
def invented() -> SimpleNamespace:
    """The builders above."""
    return SimpleNamespace(site=site, array=array, target=target, campaign=campaign, dates=dates)
