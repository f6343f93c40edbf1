"""A spacecraft and a telescope with two setups in one campaign, from files to a recounted plan."""

from __future__ import annotations

import itertools
import shutil
import warnings
from pathlib import Path

import numpy as np
import pytest

import planner
from planner import flow
from planner.campaign.records import Campaign
from planner.records import Outcome, Plan, Windows
from planner.sky.clock import EarthOrientationWarning

CAMPAIGN = """\
campaign: Invented, with a spacecraft
invented: true
season: {from: 2027-02-20, to: 2027-03-20}
seed: 3
programmes:
  - {name: echoes, targets: [sallow.yaml]}
allocations:
  - {setup: hill/wide, programme: echoes, hours: 3}
  - {setup: hill/deep, programme: echoes, hours: 3}
  - {setup: lark/imager, programme: echoes, hours: 2}
"""
HILL = """\
site: Hill
invented: true
longitude_deg: -70
latitude_deg: -28
height_m: 2000
time_zone: America/Santiago
months: {clear: [0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8, 0.8]}
telescopes:
  one:
    busy: [2027-02-22]
    busy_file: guests.ics
    mounted: {deep: [[2027-03-01, 2027-03-08]]}
    setups:
      wide: {aperture_m: 1.8, filter: V, field_arcmin: 30, sun_below_by_filter_deg: {V: -15}}
      deep: {aperture_m: 1.8, filter: R, field_arcmin: 30, largest_airmass: 1.8}
"""
GUESTS = """\
BEGIN:VCALENDAR
VERSION:2.0
BEGIN:VEVENT
DTSTART;VALUE=DATE:20270310
DTEND;VALUE=DATE:20270312
SUMMARY:Guests
END:VEVENT
END:VCALENDAR
"""
LARK = """\
spacecraft: Lark
invented: true
sun_angle_deg: [60, 135]
setups:
  imager: {aperture_m: 0.9, filter: R, image_fwhm_arcsec: 0.3, pixel_arcsec: 0.1, field_arcmin: 20}
"""


@pytest.fixture(scope="module")
def campaign(demo_folder: Path, tmp_path_factory: pytest.TempPathFactory) -> Campaign:
    folder = tmp_path_factory.mktemp("kinds")
    (folder / "campaign.yaml").write_text(CAMPAIGN)
    shutil.copy(demo_folder / "sallow.yaml", folder)
    (folder / "sites").mkdir()
    (folder / "sites" / "hill.yaml").write_text(HILL)
    (folder / "sites" / "guests.ics").write_text(GUESTS)
    (folder / "sites" / "lark.yaml").write_text(LARK)
    return planner.read_campaign(folder)


@pytest.fixture(scope="module")
def windows(campaign: Campaign) -> Windows:
    return planner.windows(campaign)


@pytest.fixture(scope="module")
def plan(campaign: Campaign) -> Plan:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", EarthOrientationWarning)
        return planner.plan(campaign, seconds=60)


def nights_of(windows: Windows, setup: str) -> set[str]:
    return {windows.nights[n] for n in windows.night[windows.rows("Sallow", setup)]}


def test_calendar_and_mounted_dates_of_the_files_reach_the_windows(windows: Windows) -> None:
    wide, deep = nights_of(windows, "hill/wide"), nights_of(windows, "hill/deep")
    assert not wide & {"2027-02-22", "2027-03-10", "2027-03-11"}
    assert {"2027-02-21", "2027-02-23", "2027-03-09", "2027-03-12"} <= wide
    assert deep == {f"2027-03-0{d}" for d in range(1, 9)}
    assert windows.airmass[windows.rows("Sallow", "hill/deep")].max() <= 1.8 + 1e-6


def test_the_spacecraft_is_forecast_without_air(campaign: Campaign) -> None:
    made = planner.forecast(campaign)
    mine = [m for m in made.target("Sallow").measurable if m.setup == "lark/imager"]
    assert mine
    assert all(np.isfinite(m.chance).all() for m in mine)


def test_the_plan_uses_both_and_passes_its_recount(campaign: Campaign, plan: Plan) -> None:
    assert plan.outcome is not Outcome.IMPOSSIBLE
    table = plan.table()
    space = table[table.setup == "lark/imager"]
    assert len(space)
    assert space.airmass.isna().all()
    assert space.moon_separation_deg.isna().all()
    assert (space.chance_clear == 1.0).all()
    assert (space.expected_snr > 5).all()
    assert (space.night == space.start_utc.str[:10]).all()
    assert (table[table.setup != "lark/imager"].chance_clear < 1.0).all()


def test_two_setups_of_one_telescope_never_work_at_once(campaign: Campaign, plan: Plan) -> None:
    """They are one machine in the problem that is solved, and their looks in the plan do not overlap."""
    from planner.campaign.checks import find_setup

    telescopes = {s.name: s.telescope for s in campaign.setups}
    assert telescopes["hill/wide"] == telescopes["hill/deep"] != telescopes["lark/imager"]
    assert find_setup(campaign.file, 1, campaign.sites["hill"]).telescope == "hill/one"
    looks = sorted((k for k in plan.looks if k.slot.telescope == "hill/one"), key=lambda k: k.start_mjd)
    assert looks
    for a, b in itertools.pairwise(looks):
        assert b.start_mjd >= a.end_mjd - 1e-6


def test_slots_of_both_setups_carry_the_same_telescope_number(campaign: Campaign, windows: Windows) -> None:
    ready = flow.prepare(campaign)
    book = flow._book(campaign, ready, windows, lambda stage, share: None)
    setups = np.array([s.setup for s in book.slots])
    numbers = {name: set(book.problem.telescope[setups == name].tolist()) for name in set(setups.tolist())}
    assert numbers["hill/wide"] == numbers["hill/deep"]
    assert numbers["hill/wide"] != numbers["lark/imager"]
    assert all(len(n) == 1 for n in numbers.values())
