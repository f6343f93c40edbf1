"""Invented echo campaigns, one a shape of dust, written to a folder and read again."""

from __future__ import annotations

from pathlib import Path

from planner.campaign.reading import read_campaign
from planner.campaign.records import Campaign
from planner.prediction.model import TargetModel, build_model

CAMPAIGN = """\
campaign: Invented echoes
invented: true
season: {from: 2027-02-01, to: 2027-06-20}
seed: 11
programmes:
  - {name: echoes, targets: [target.yaml]}
allocations:
  - {setup: hill/plain, programme: echoes, hours: 20}
  - {setup: hill/polar, programme: echoes, hours: 20}
"""

SITE = """\
site: Invented Hill
invented: true
longitude_deg: -70
latitude_deg: -25
height_m: 2400
time_zone: America/Santiago
months: {clear: [0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8]}
telescopes:
  four:
    setups:
      plain: {aperture_m: 3.6, filter: V, field_arcmin: 180, subtraction_floor: 0.0005}
      polar: {aperture_m: 3.6, filter: V, field_arcmin: 180, subtraction_floor: 0.0005, polarimeter: true}
"""

HEAD = """\
target: Invented
invented: true
position: {ra: "10:30:00", dec: "-30:00:00"}
"""

OUTBURST = "outburst: {peak: {date: 2024-03-01, sigma_days: 2}, lasting_days: 40, peak_mag: {V: 6.0, R: 5.7}}\n"
DISTANCE = "distance_pc: {lognormal: {median: 8000, sigma_fraction: 0.1}}\n"
SEEN = "brightness: {seen: {mag_arcsec2: 22.5, sigma: 0.2, filter: V, on: 2026-10-10}}"

DUST = {
    "sheet": "{shape: sheet, depth_pc: {lognormal: {median: 20, sigma_fraction: 0.2}}, tilt: {slope_sigma: 0.3}}",
    "behind": "{shape: sheet, depth_pc: {normal: {mean: -0.2, sigma: 0.05}}, thickness_pc: 0.1}",
    "beside": "{shape: sheet, depth_pc: {normal: {mean: 0, sigma: 0.1}}, thickness_pc: 0.1}",
    "shell": "{shape: shell, radius_pc: {lognormal: {median: 1.2, sigma_fraction: 0.2}}, thickness_pc: 0.05}",
    "screen": "{shape: screen, distance_pc: {lognormal: {median: 3000, sigma_fraction: 0.1}}, thickness_pc: 5}",
    "infinity": (
        "{shape: screen, source_at_infinity: true, distance_pc: {lognormal: {median: 500, sigma_fraction: 0.1}}}"
    ),
    "filled": "{shape: filled, p_max: 0.4}",
}
LIGHT = dict.fromkeys(DUST, SEEN) | {
    "filled": "brightness: {seen: {polarised_mag_arcsec2: 22.5, sigma: 0.2, filter: V, on: 2026-10-10}}"
}

ARCLET = """\
  - arclet: Old light
    position:
      radius_arcsec: {lognormal: {median: 2400, sigma_fraction: 0.05}}
      pa_deg: {normal: {mean: 40, sigma: 10}}
    on: 2026-09-01
    age_yr: {lognormal: {median: 150, sigma_fraction: 0.5}}
    width_arcsec: 3
    seen: {mag_arcsec2: 21.5, sigma: 0.2, filter: V}
    goals: [{learn: age_yr, to: 20 %}, {learn: source_direction_deg, to: 5 deg}, {learn: distance_pc, to: 5 %}]
"""


def ring_text(shape: str, *, more: str = "", dust: str | None = None, light: str | None = None) -> str:
    """A target with one ring on dust of a shape; ``more``: further lines of the ring."""
    ring = f"  - ring: Echo\n    dust: {dust or DUST[shape]}\n    {light or LIGHT[shape]}\n"
    lines = "".join(f"    {line}\n" for line in more.splitlines())
    return HEAD + OUTBURST + DISTANCE + "features:\n" + ring + lines


def arclet_text(more: str = "") -> str:
    """A target with one arclet and no outburst."""
    return HEAD + DISTANCE + "features:\n" + ARCLET + "".join(f"    {line}\n" for line in more.splitlines())


def campaign_in(folder: Path, target: str, campaign: str = CAMPAIGN, site: str = SITE) -> Campaign:
    """Write the files and read them."""
    (folder / "sites").mkdir(parents=True, exist_ok=True)
    (folder / "campaign.yaml").write_text(campaign, encoding="utf-8")
    (folder / "target.yaml").write_text(target, encoding="utf-8")
    (folder / "sites" / "hill.yaml").write_text(site, encoding="utf-8")
    return read_campaign(folder)


def model_in(folder: Path, target: str) -> TargetModel:
    """The observation model of the only target."""
    campaign = campaign_in(folder, target)
    return build_model(campaign, campaign.targets[0], {})
