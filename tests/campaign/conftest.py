"""An invented campaign on disk, whose files a test may change before it is read."""

from __future__ import annotations

from pathlib import Path

import pytest

CAMPAIGN = """\
campaign: Invented rings and knots
invented: true
season: {from: 2027-02-01, to: 2027-04-30}
seed: 7
programmes:
  - name: echoes
    targets: [reed.yaml]
    weights: {Reed: 2}
  - name: knots
    targets: [moss.yaml]
allocations:
  - setup: brack-ridge/wide-camera
    programme: echoes
    hours: 10
    sky: dark
  - setup: hill/big
    programme: echoes
    hours: 3
  - setup: dishes/43ghz
    programme: knots
    hours: 20
fixed_looks:
  - {target: Reed, setup: hill/big, start_utc: 2027-03-01T20:00:00Z, minutes: 30}
"""

RING = """\
target: Reed
invented: true
position:
  ra: "06:14:22.10"
  dec: "-12:31:08.0"
source_now_mag: {V: 16.5}
outburst:
  peak: {date: 2021-05-20, sigma_days: 3}
  lasting_days: 60
  peak_mag: {V: 7.9}
distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}
features:
  - ring: Reed ring
    dust:
      shape: sheet
      depth_pc: {lognormal: {median: 24, sigma_fraction: 0.25}}
    brightness:
      seen: {mag_arcsec2: 25.3, sigma: 0.15, filter: V, on: 2026-11-10, pa_deg: [20, 75]}
    goals:
      - {learn: depth_over_distance2, to: 2 %}
      - {looks: 4}
"""

KNOT = """\
target: Moss
invented: true
position: {ra: "11:27:33.4", dec: "+24:08:51"}
redshift: 0.412
features:
  - knot: Moss K2
    motion:
      core_crossing: {date: 2026-06-10, sigma_days: 60, at_ghz: 43}
      speed_mas_yr: {normal: {mean: 0.31, sigma: 0.06}}
      pa_deg: {normal: {mean: -62, sigma: 4}}
    flux: {mjy: 180, on: 2026-10-01, ghz: 43, fades: {exponential_days: 260}}
    goals:
      - {learn: apparent_speed_c, to: 15 %}
      - {learn: core_crossing, to: 45 d}
""".replace("{normal: {mean: 0.31, sigma: 0.06}}", "{lognormal: {median: 0.31, sigma_fraction: 0.2}}")

HILL = """\
site: Invented Hill
invented: true
longitude_deg: 12.5
latitude_deg: 41.2
height_m: 900
time_zone: Europe/Rome
months:
  clear: [0.4, 0.4, 0.5, 0.5, 0.6, 0.6, 0.7, 0.7, 0.6, 0.5, 0.4, 0.4]
telescopes:
  one:
    setups:
      big: {camera: ccd_blue, aperture_m: 1.2, filter: V, read_noise_e: 7}
"""

DISHES = """\
array: Invented Dishes
invented: true
least_stations: 2
stations:
  - {station: A, longitude_deg: 0, latitude_deg: 40, height_m: 10, sefd_jy: {43ghz: 1400}}
  - {station: B, longitude_deg: 20, latitude_deg: 45, height_m: 10, sefd_jy: {43ghz: 1400, 22ghz: 700}}
  - {station: C, longitude_deg: 40, latitude_deg: 40, height_m: 10, sefd_jy: {43ghz: 1400}}
receivers:
  43ghz: {receiver_class: 43ghz_cooled, look_hours: 3}
  22ghz: {receiver_class: 22ghz_cooled, look_hours: 3}
months:
  clear: [0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8]
"""

FILES = {
    "campaign.yaml": CAMPAIGN,
    "reed.yaml": RING,
    "moss.yaml": KNOT,
    "sites/hill.yaml": HILL,
    "sites/dishes.yaml": DISHES,
}


class Folder:
    """A campaign folder; ``edit`` replaces one piece of text that must be there exactly once."""

    def __init__(self, path: Path) -> None:
        self.path = path
        for name, text in FILES.items():
            (path / name).parent.mkdir(exist_ok=True)
            (path / name).write_text(text, encoding="utf-8")

    def edit(self, name: str, old: str, new: str) -> Folder:
        text = (self.path / name).read_text(encoding="utf-8")
        assert text.count(old) == 1, f"{old!r} stands {text.count(old)} times in {name}"
        (self.path / name).write_text(text.replace(old, new), encoding="utf-8")
        return self

    def append(self, name: str, text: str) -> Folder:
        path = self.path / name
        path.write_text(path.read_text(encoding="utf-8") + text, encoding="utf-8")
        return self

    def line(self, name: str, piece: str) -> int:
        """1-based number of the only line that holds ``piece``."""
        lines = (self.path / name).read_text(encoding="utf-8").splitlines()
        found = [n for n, line in enumerate(lines, start=1) if piece in line]
        assert len(found) == 1, f"{piece!r} is on lines {found} of {name}"
        return found[0]


@pytest.fixture
def folder(tmp_path: Path) -> Folder:
    return Folder(tmp_path)
