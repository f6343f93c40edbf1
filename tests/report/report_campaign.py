"""A campaign that matches the invented records, made in Python, and what was understood of it."""

from __future__ import annotations

from dataclasses import dataclass
from types import SimpleNamespace
from typing import Any

from planner.campaign.records import Campaign, CampaignFile, Site, Target


@dataclass(frozen=True)
class Assumed:
    owner: str
    field: str
    value: object
    why: str


UNDERSTOOD = SimpleNamespace(
    assumptions=(
        Assumed("Reed ring", "dust.thickness_pc", 0.5, "thin filament, common practice; no source"),
        Assumed("north-hill/wide-camera", "readout_s", 20.0, "common practice"),
    ),
    answers=(("Reed", "Reed ring", "radius 24.0 ± 0.9 arcsec at mid-season"),),
    ties=(("Reed", "depth and distance: radii fix depth/distance² only"),),
    warnings=("Reed: sheet is 0.31 of its depth thick, above 0.2",),
)


def ring_target(name: str = "Reed", feature: str = "Reed ring", *, anchored: bool = True) -> Target:
    seen = {"mag_arcsec2": 25.3, "sigma": 0.15, "filter": "V", "on": "2026-11-10"}
    brightness: dict[str, Any] = (
        {"seen": seen} if anchored else {"extinction_mag": {"lognormal": {"median": 0.3, "sigma_fraction": 0.5}}}
    )
    return Target.model_validate(
        {
            "target": name,
            "invented": True,
            "position": {"ra": "06:14:22.10", "dec": "-12:31:08.0"},
            "outburst": {"peak": {"date": "2021-05-20", "sigma_days": 3}, "lasting_days": 60, "peak_mag": {"V": 7.9}},
            "distance_pc": {"lognormal": {"median": 6100, "sigma_fraction": 0.12}},
            "features": [
                {
                    "ring": feature,
                    "dust": {"shape": "sheet", "depth_pc": {"lognormal": {"median": 24, "sigma_fraction": 0.25}}},
                    "brightness": brightness,
                }
            ],
        }
    )  # fmt: skip


def make_campaign(name: str = "Reed and Heron", *, invented: bool = True, targets: tuple[Target, ...] = ()) -> Campaign:
    file = CampaignFile.model_validate(
        {
            "campaign": name,
            "invented": invented,
            "season": {"from": "2027-02-01", "to": "2027-05-31"},
            "seed": 1,
            "programmes": [{"name": "echoes", "targets": ["reed.yaml"]}],
            "allocations": [{"setup": "north-hill/wide-camera", "programme": "echoes", "hours": 14}],
        }
    )
    site = Site.model_validate(
        {
            "site": "North Hill",
            "invented": invented,
            "longitude_deg": -70,
            "latitude_deg": -30,
            "height_m": 2000,
            "time_zone": "America/Santiago",
            "months": {"clear": [0.7] * 12},
            "telescopes": {"one-eight": {"setups": {"wide-camera": {"aperture_m": 1.8}}}},
        }
    )
    return Campaign("made", file, targets or (ring_target(),), {"north-hill": site}, ())
