"""Shipped folders are found in an installed package and beside the source tree; all say that they are invented."""

from __future__ import annotations

from pathlib import Path
from zoneinfo import ZoneInfo

import numpy as np
import pytest

from planner.campaign.reading import read_campaign, read_site
from planner.campaign.records import ArraySite, Campaign, CampaignFile, Programme, Site, SpacecraftSite, Target
from planner.campaign.shipped import shipped_folder
from planner.errors import InputError
from planner.units import LIGHT_M_S

PROFILES = sorted(p.stem for p in shipped_folder("site_profiles").glob("*.yaml"))


@pytest.mark.parametrize("kind", ["targets", "site_profiles"])
def test_an_installed_package_holds_them_inside(tmp_path, kind):
    package = tmp_path / "planner"
    (package / "shipped" / kind).mkdir(parents=True)
    (tmp_path / kind).mkdir()  # another package's folder of the same name must not be taken
    assert shipped_folder(kind, package) == package / "shipped" / kind


@pytest.mark.parametrize("kind", ["targets", "site_profiles"])
def test_the_source_tree_holds_them_beside_the_package(tmp_path, kind):
    package = tmp_path / "planner"
    package.mkdir()
    (tmp_path / kind).mkdir()
    with pytest.raises(InputError, match=f"the shipped folder '{kind}' is missing; install lightlag again"):
        shipped_folder(kind, package)  # a folder beside an installed package belongs to others
    (tmp_path / "pyproject.toml").touch()
    assert shipped_folder(kind, package) == tmp_path / kind


def test_the_four_profiles_are_shipped():
    assert {"brack-ridge", "cairn-south", "cairn-array", "lark-orbiter"} <= set(PROFILES)


@pytest.mark.parametrize("slug", PROFILES)
def test_each_profile_is_read_and_says_that_it_is_invented(slug):
    site = read_site(shipped_folder("site_profiles") / f"{slug}.yaml")
    assert site.invented is True
    if isinstance(site, SpacecraftSite):
        assert site.months.clear == (1.0,) * 12  # no weather up there
        return
    clear = np.array(site.months.clear)
    assert clear.max() - clear.min() > 0.1  # the weather has seasons
    if isinstance(site, Site):
        assert ZoneInfo(site.time_zone).key == site.time_zone


def test_the_two_telescopes_stand_in_two_hemispheres():
    north, south = (read_site(shipped_folder("site_profiles") / f"{s}.yaml") for s in ("brack-ridge", "cairn-south"))
    assert isinstance(north, Site)
    assert isinstance(south, Site)
    assert north.latitude_deg > 25
    assert south.latitude_deg < -25
    assert north.telescopes["one-eight"].setups["wide-camera"].aperture_m == 1.8
    assert south.telescopes["two-four"].setups["imager"].aperture_m == 2.4


def test_the_arrays_longest_baseline_is_about_8000_km_and_its_beam_fits_the_band():
    """Chords over a sphere of 6371 km: 0.3 % from the true Earth. The beam is wavelength over baseline."""
    array = read_site(shipped_folder("site_profiles") / "cairn-array.yaml")
    assert isinstance(array, ArraySite)
    assert len(array.stations) == 8
    lon, lat = np.radians([[s.longitude_deg, s.latitude_deg] for s in array.stations]).T
    xyz = 6371.0 * np.stack([np.cos(lat) * np.cos(lon), np.cos(lat) * np.sin(lon), np.sin(lat)], axis=1)
    longest_km = np.linalg.norm(xyz[:, None] - xyz[None], axis=-1).max()
    assert longest_km == pytest.approx(8000, abs=300)
    beam_mas = np.degrees(LIGHT_M_S / (array.receivers["43ghz"].ghz * 1e9) / (longest_km * 1e3)) * 3.6e6
    assert 0.1 < beam_mas < 0.3  # such arrays resolve 0.1-0.3 mas at 43 GHz
    assert all({"43ghz", "22ghz"} <= set(s.sefd_jy) for s in array.stations)


def test_every_shipped_campaign_is_read_and_says_that_it_is_invented():
    folders = [p.parent for p in shipped_folder("targets").glob("*/campaign.yaml")]
    assert folders
    for folder in folders:
        campaign = read_campaign(folder)
        assert campaign.file.invented
        assert all(target.invented for target in campaign.targets)
        assert all(site.invented for site in campaign.sites.values())


@pytest.mark.parametrize("kind", [CampaignFile, Target, Site, ArraySite])
def test_each_file_has_a_json_schema_without_inner_fields(kind):
    schema = kind.model_json_schema()
    assert "source" not in schema["properties"]
    assert schema["additionalProperties"] is False


def test_a_targets_programme_is_found_by_its_whole_path(folder):
    """Two files of one name in two folders are two targets."""
    other = folder.path / "far"
    other.mkdir()
    (other / "reed.yaml").write_text((folder.path / "moss.yaml").read_text())
    folder.edit("campaign.yaml", "[moss.yaml]", "[far/reed.yaml]")
    campaign = read_campaign(folder.path)
    assert campaign.programme_of(campaign.target("Moss")).name == "knots"
    assert campaign.programme_of(campaign.target("Reed")).name == "echoes"


def test_a_programme_from_python_is_found_by_the_files_name(folder):
    read = read_campaign(folder.path)
    moved = Campaign(
        folder=str(Path("elsewhere")),
        file=read.file.model_copy(update={"programmes": (Programme(name="all", targets=("reed.yaml", "moss.yaml")),)}),
        targets=read.targets,
        sites=read.sites,
        setups=read.setups,
    )
    assert moved.programme_of(read.target("Moss")).name == "all"
