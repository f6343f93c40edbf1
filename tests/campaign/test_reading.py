"""A campaign is read whole or not at all, and every fault names file, line, field, value and remedy."""

from __future__ import annotations

import datetime as dt
import re
from pathlib import Path

import pytest

from planner.campaign.reading import read_campaign, read_site, read_target
from planner.errors import InputError, UnknownName

# Each row: file, text taken out, text put in, a piece of the line that the message must name, what it must say.
FAULTS = {
    "unknown key": (
        "reed.yaml",
        "lasting_days: 60",
        "lastin_days: 60",
        "lastin_days",
        r"outburst\.lastin_days: unknown key 'lastin_days'; did you mean 'lasting_days'\? "
        r"\(allowed: lasting_days, light_curve, peak, peak_mag, pulses\)",
    ),
    "unknown key at the top": (
        "campaign.yaml",
        "seed: 7",
        "sede: 7",
        "sede",
        r"sede: unknown key 'sede'; did you mean 'seed'\?",
    ),
    "unknown key of a law": (
        "reed.yaml",
        "median: 24, sigma_fraction",
        "median: 24, sigma_fracton",
        "median: 24",
        r"depth_pc\.lognormal\.sigma_fracton: unknown key 'sigma_fracton'; did you mean 'sigma_fraction'\?",
    ),
    "unknown law": (
        "reed.yaml",
        "depth_pc: {lognormal:",
        "depth_pc: {log_normal:",
        "depth_pc",
        r"features\[0\]\.dust\.depth_pc: unknown law 'log_normal'; did you mean 'lognormal'\?",
    ),
    "misspelt kind of feature": (
        "reed.yaml",
        "- ring: Reed ring",
        "- rings: Reed ring",
        "rings",
        r"features\[0\]\.rings: unknown kind of feature 'rings'; did you mean 'ring'\? "
        r"\(allowed: arclet, knot, pair, ring\)",
    ),
    "misspelt kind of goal": (
        "reed.yaml",
        "{looks: 4}",
        "{lookz: 4}",
        "lookz",
        r"goals\[1\]\.lookz: unknown kind of goal 'lookz'; did you mean 'looks'\?",
    ),
    "source is no key": (
        "reed.yaml",
        "invented: true",
        "source: {path: x}",
        "source: {",
        r"source: unknown key 'source'",
    ),
    "wrong unit": (
        "moss.yaml",
        "to: 45 d",
        "to: 45 pc",
        "45 pc",
        r"goals\[1\]\.to: got unit 'pc' in '45 pc'; core_crossing takes one of: d, day, days",
    ),
    "no unit": (
        "moss.yaml",
        "to: 45 d",
        "to: 45",
        "to: 45",
        r"got no unit in '45'; core_crossing takes.*e\.g\. '45 d'",
    ),
    "percent of a date": (
        "moss.yaml",
        "to: 45 d",
        "to: 4 %",
        "4 %",
        r"got '4 %', but core_crossing may be 0 or below, where percent means nothing; "
        r"write one standard deviation in d",
    ),
    "percent of a depth that may be negative": (
        "reed.yaml",
        "{lognormal: {median: 24, sigma_fraction: 0.25}}",
        "{normal: {mean: 24, sigma: 30}}",
        "to: 2 %",
        r"goals\[0\]\.to: got '2 %', but the prior of dust\.depth_pc allows 0 and below",
    ),
    "unit inside a number": (
        "reed.yaml",
        "lasting_days: 60",
        "lasting_days: 60 d",
        "lasting_days",
        r"lasting_days: got '60 d', needs a bare number; the unit is the one in the field's name",
    ),
    "negative distance": (
        "reed.yaml",
        "distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}",
        "distance_pc: -6100",
        "distance_pc",
        r"distance_pc: got -6100, needs a value above 0",
    ),
    "negative median": (
        "reed.yaml",
        "median: 6100",
        "median: -6100",
        "distance_pc",
        r"distance_pc\.lognormal\.median: got -6100, needs a value above 0",
    ),
    "a distance whose law reaches 0": (
        "reed.yaml",
        "distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}",
        "distance_pc: {normal: {mean: 6100, sigma: 700}}",
        "distance_pc",
        r"distance_pc: got a law that reaches -inf, needs a value above 0 \(use lognormal",
    ),
    "dates reversed": (
        "campaign.yaml",
        "{from: 2027-02-01, to: 2027-04-30}",
        "{from: 2027-04-30, to: 2027-02-01}",
        "season",
        r"season: to 2027-02-01 is before from 2027-04-30; swap them",
    ),
    "no day of the calendar": (
        "campaign.yaml",
        "to: 2027-04-30}",
        "to: 2027-04-31}",
        "season",
        r"season\.to: got '2027-04-31', which is no day of the calendar",
    ),
    "date as a bare number": (
        "reed.yaml",
        "date: 2021-05-20",
        "date: 20210520",
        "peak: {",
        r"outburst\.peak\.date: got 20210520; write a date as year-month-day",
    ),
    "date out of range": (
        "campaign.yaml",
        "from: 2027-02-01",
        "from: 0227-02-01",
        "season",
        r"season\.from: got 0227-02-01, needs a year from 1973 to 2100",
    ),
    "NaN": (
        "reed.yaml",
        "lasting_days: 60",
        "lasting_days: .nan",
        "lasting_days",
        r"lasting_days: got nan, needs a finite number",
    ),
    "infinite": (
        "campaign.yaml",
        "hours: 10",
        "hours: .inf",
        "hours: .inf",
        r"allocations\[0\]\.hours: got inf, needs a finite number",
    ),
    "NaN in a law": (
        "reed.yaml",
        "median: 24",
        "median: .nan",
        "depth_pc",
        r"depth_pc\.lognormal\.median: got nan, needs a finite",
    ),
    "true for a number": (
        "campaign.yaml",
        "hours: 10",
        "hours: true",
        "hours: true",
        r"hours: got true, needs a number",
    ),
    "filter without a magnitude": (
        "reed.yaml",
        "filter: V, on",
        "filter: R, on",
        "seen: {",
        r"brightness\.seen\.filter: filter 'R' without a magnitude: ring 'Reed ring' was seen in it, so "
        r"outburst\.peak_mag needs a value for 'R' \(allowed: filters with a peak magnitude: V\)",
    ),
    "no peak magnitude": (
        "reed.yaml",
        "peak_mag: {V: 7.9}",
        "peak_mag: {}",
        "peak_mag",
        r"peak_mag: has 0 entries, needs at least 1",
    ),
    "unknown filter": (
        "reed.yaml",
        "filter: V, on",
        "filter: v, on",
        "seen: {",
        r"seen\.filter: unknown filter 'v'.*\(allowed: B, I, R, V, g, i, r\)",
    ),
    "unknown filter as a key": (
        "reed.yaml",
        "peak_mag: {V: 7.9}",
        "peak_mag: {VV: 7.9}",
        "peak_mag",
        r"peak_mag\.VV: unknown filter 'VV'",
    ),
    "seen before the outburst": (
        "reed.yaml",
        "on: 2026-11-10",
        "on: 2020-11-10",
        "seen: {",
        r"seen\.on: got 2020-11-10, but the outburst peaked on 2021-05-20: no ring is seen before it",
    ),
    "one position angle": (
        "reed.yaml",
        "pa_deg: [20, 75]",
        "pa_deg: [20]",
        "seen: {",
        r"pa_deg: got \[20\], needs two position angles",
    ),
    "empty sector": ("reed.yaml", "pa_deg: [20, 75]", "pa_deg: [20, 20]", "seen: {", r"an empty sector"),
    "list for a mapping": (
        "reed.yaml",
        "outburst:\n  peak: {date: 2021-05-20, sigma_days: 3}\n  lasting_days: 60\n  peak_mag: {V: 7.9}",
        "outburst: [1, 2]",
        "outburst",
        r"outburst: got a list, needs a mapping of fields",
    ),
    "nothing for a mapping": (
        "campaign.yaml",
        "    weights: {Reed: 2}",
        "    weights:",
        "weights",
        r"weights: got nothing, needs a mapping",
    ),
    "a word for a list": (
        "campaign.yaml",
        "targets: [moss.yaml]",
        "targets: moss.yaml",
        "moss",
        r"targets: got 'moss\.yaml', needs a list",
    ),
    "missing field": ("reed.yaml", "      shape: sheet\n", "", "dust:", r"features\[0\]\.dust\.shape: is missing"),
    "ring without outburst": (
        "reed.yaml",
        "outburst:\n  peak: {date: 2021-05-20, sigma_days: 3}\n  lasting_days: 60\n  peak_mag: {V: 7.9}\n",
        "",
        "- ring",
        r"features\[0\]\.ring: ring 'Reed ring' needs the target's outburst",
    ),
    "ring without distance": (
        "reed.yaml",
        "distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}\n",
        "",
        "- ring",
        r"ring 'Reed ring' needs the target's distance_pc",
    ),
    "knot without scale": (
        "moss.yaml",
        "redshift: 0.412\n",
        "",
        "- knot",
        r"knot 'Moss K2' needs the target's redshift or distance_pc",
    ),
    "declination": (
        "moss.yaml",
        '"+24:08:51"',
        '"+94:08:51"',
        "dec:",
        r"position\.dec: got 94\.1475, needs a value of at most 90",
    ),
    "angle as words": (
        "moss.yaml",
        '"+24:08:51"',
        "north",
        "dec:",
        r"position\.dec: got 'north'; write ±dd:mm:ss\.s in quotes",
    ),
    "unknown quantity": (
        "moss.yaml",
        "learn: core_crossing",
        "learn: core_crossin",
        "core_crossin,",
        r"goals\[1\]\.learn: unknown quantity 'core_crossin'; did you mean 'core_crossing'\?",
    ),
    "quantity of another kind": (
        "moss.yaml",
        "learn: core_crossing, to: 45 d",
        "learn: depth_pc, to: 45 pc",
        "depth_pc",
        r"'depth_pc' belongs to a ring, not to a knot \(allowed: apparent_speed_c, speed_mas_yr",
    ),
    "programme twice": (
        "campaign.yaml",
        "name: knots",
        "name: echoes",
        "targets: [moss",
        r"programme 'echoes' is already named on line 6",
    ),
    "file in two programmes": (
        "campaign.yaml",
        "[moss.yaml]",
        "[moss.yaml, ./reed.yaml]",
        "moss.yaml",
        r"programmes\[1\]\.targets\[1\]: target file '\./reed\.yaml' is already in programme 'echoes' \(line 7\)",
    ),
    "unknown programme": (
        "campaign.yaml",
        "programme: knots",
        "programme: knot",
        "programme: knot",
        r"allocations\[2\]\.programme: unknown programme 'knot'; did you mean 'knots'\?",
    ),
    "unknown site": (
        "campaign.yaml",
        "brack-ridge/wide-camera",
        "brak-ridge/wide-camera",
        "brak-ridge",
        r"allocations\[0\]\.setup: unknown site 'brak-ridge'; did you mean 'brack-ridge'\? \(allowed: .*hill",
    ),
    "unknown setup": (
        "campaign.yaml",
        "brack-ridge/wide-camera",
        "brack-ridge/wide-camra",
        "wide-camra",
        r"unknown setup of brack-ridge 'wide-camra'; did you mean 'wide-camera'\?",
    ),
    "unknown receiver": (
        "campaign.yaml",
        "dishes/43ghz",
        "dishes/44ghz",
        "44ghz",
        r"unknown receiver of dishes '44ghz'; did you mean '43ghz'\?",
    ),
    "setup without a slash": (
        "campaign.yaml",
        "dishes/43ghz",
        "dishes",
        "setup: dishes",
        r"got 'dishes'; write site/setup",
    ),
    "too few stations": (
        "campaign.yaml",
        "dishes/43ghz",
        "dishes/22ghz",
        "22ghz",
        r"only 1 stations of dishes have a sefd_jy for '22ghz', fewer than its least_stations 2",
    ),
    "weight of a stranger": (
        "campaign.yaml",
        "weights: {Reed: 2}",
        "weights: {Read: 2}",
        "Read",
        r"programmes\[0\]\.weights\.Read: unknown target of programme 'echoes' 'Read'; did you mean 'Reed'\?",
    ),
    "weight of 0": (
        "campaign.yaml",
        "weights: {Reed: 2}",
        "weights: {Reed: 0}",
        "weights",
        r"weights\.Reed: got 0, needs a value above 0",
    ),
    "fixed look at a stranger": (
        "campaign.yaml",
        "target: Reed",
        "target: Rede",
        "Rede",
        r"fixed_looks\[0\]\.target: unknown target 'Rede'",
    ),
    "fixed look with an unknown setup": (
        "campaign.yaml",
        "setup: hill/big, start",
        "setup: hill/bgi, start",
        "bgi",
        r"fixed_looks\[0\]\.setup: unknown setup 'hill/bgi'",
    ),
    "fixed look on another programme's setup": (
        "campaign.yaml",
        "setup: hill/big, start",
        "setup: dishes/43ghz, start",
        "start_utc",
        r"programme 'echoes' of target 'Reed' has no allocation on 'dishes/43ghz' "
        r"\(allowed: brack-ridge/wide-camera, hill/big\)",
    ),
    "fixed look outside the season": (
        "campaign.yaml",
        "2027-03-01T20:00:00Z",
        "2027-05-01T20:00:00Z",
        "start_utc",
        r"fixed_looks\[0\]\.start_utc: got 2027-05-01T20:00:00Z, of the night 2027-05-01: outside the season "
        r"\(allowed: 2027-02-01 to 2027-04-30\)",
    ),
    "fixed look without a time of day": (
        "campaign.yaml",
        "2027-03-01T20:00:00Z",
        "2027-03-01",
        "start_utc",
        r"write date and time in UTC",
    ),
    "missing target file": (
        "campaign.yaml",
        "[reed.yaml]",
        "[ree.yaml]",
        "ree.yaml",
        r"target file '.*ree\.yaml' does not exist; did you mean 'reed\.yaml'\?",
    ),
    "unknown camera preset": (
        "sites/hill.yaml",
        "ccd_blue",
        "ccd_blu",
        "ccd_blu",
        r"setups\.big\.camera: unknown camera preset 'ccd_blu'; did you mean 'ccd_blue'\?",
    ),
    "unknown receiver class": (
        "sites/dishes.yaml",
        "{receiver_class: 43ghz_cooled",
        "{receiver_class: 43ghz_coold",
        "43ghz_coold",
        r"receivers\.43ghz\.receiver_class: unknown receiver_class preset '43ghz_coold'; did you mean '43ghz_cooled'\?",
    ),
    "eleven months": (
        "sites/hill.yaml",
        "clear: [0.4, ",
        "clear: [",
        "clear",
        r"months\.clear: got 11 values, needs a list of 12 shares",
    ),
    "a month that is never clear": (
        "sites/hill.yaml",
        "clear: [0.4, ",
        "clear: [0, ",
        "clear",
        r"clear\[0\]: got 0, needs a value above 0",
    ),
    "time zone": (
        "sites/hill.yaml",
        "Europe/Rome",
        "Europe/Rom",
        "time_zone",
        r"unknown time zone 'Europe/Rom' \(allowed: an IANA name such as Europe/Rome",
    ),
    "station with an unknown receiver": (
        "sites/dishes.yaml",
        "sefd_jy: {43ghz: 1400, 22ghz: 700}",
        "sefd_jy: {43ghz: 1400, 22gh: 700}",
        "22gh:",
        r"stations\[1\]\.sefd_jy\.22gh: unknown receiver '22gh'; did you mean '22ghz'\?",
    ),
    "more least stations than there are": (
        "sites/dishes.yaml",
        "least_stations: 2",
        "least_stations: 4",
        "least_stations",
        r"got 4, above the 3 stations listed",
    ),
    "a key twice": (
        "reed.yaml",
        "lasting_days: 60",
        "lasting_days: 60\n  lasting_days: 70",
        "lasting_days: 70",
        r"key 'lasting_days' stands twice; the first is on line 9",
    ),
    "broken YAML": (
        "reed.yaml",
        "source_now_mag: {V: 16.5}",
        "source_now_mag: {V: 16.5",
        "outburst:",
        r"not valid YAML: .*flow mapping",
    ),
}


@pytest.mark.parametrize("case", FAULTS)
def test_each_fault_is_told_with_file_line_field_value_and_remedy(folder, case):
    name, old, new, piece, message = FAULTS[case]
    folder.edit(name, old, new)
    with pytest.raises(InputError, match=message) as caught:
        read_campaign(folder.path)
    if case == "programme twice":  # the second "name: echoes" stands on the line before the piece
        line = folder.line(name, piece) - 1
    else:
        line = folder.line(name, piece)
    first = str(caught.value).splitlines()[0]
    assert first.startswith(f"{folder.path / name}:{line}"), first
    assert "Traceback" not in first
    assert "pydantic" not in str(caught.value)


def test_the_whole_campaign_is_read_with_targets_sites_and_setups(folder):
    campaign = read_campaign(folder.path)
    assert [t.name for t in campaign.targets] == ["Reed", "Moss"]
    assert [s.name for s in campaign.setups] == ["brack-ridge/wide-camera", "hill/big", "dishes/43ghz"]
    assert [s.telescope for s in campaign.setups] == ["brack-ridge/one-eight", "hill/one", "dishes"]
    assert [s.is_array for s in campaign.setups] == [False, False, True]
    assert list(campaign.sites) == ["brack-ridge", "hill", "dishes"]
    assert campaign.programme_of(campaign.target("Moss")).name == "knots"
    assert campaign.weight_of(campaign.target("Reed")) == 2
    assert campaign.weight_of(campaign.target("Moss")) == 1  # not stated
    assert campaign.file.fixed_looks[0].start_utc == dt.datetime(2027, 3, 1, 20, tzinfo=dt.UTC)
    assert len(campaign.nights) == 28 + 31 + 30


def test_folder_and_file_read_the_same(folder):
    assert read_campaign(folder.path) == read_campaign(str(folder.path / "campaign.yaml"))


def test_a_relative_path_is_shown_as_it_was_given(folder, monkeypatch):
    monkeypatch.chdir(folder.path.parent)
    folder.edit("reed.yaml", "lasting_days: 60", "lasting_days: 0")
    given = folder.path.name
    with pytest.raises(InputError, match=rf"^{re.escape(given)}/reed\.yaml:9, outburst\.lasting_days: got 0, needs"):
        read_campaign(given)


def test_a_folders_own_site_comes_before_a_shipped_one(folder):
    own = (folder.path / "sites/hill.yaml").read_text().replace("big:", "wide-camera:")
    (folder.path / "sites/brack-ridge.yaml").write_text(own)
    assert read_campaign(folder.path).sites["brack-ridge"].name == "Invented Hill"


def test_every_record_knows_the_line_of_its_fields(folder):
    target = read_campaign(folder.path).target("Reed")
    assert target.source.place("outburst", "lasting_days").line == 9
    assert target.source.place("features", 0, "goals", 1, "looks").line == 21
    assert target.source.place("features", 0, "dust", "tilt", "slope_sigma").line == 14  # left out: that of dust
    assert str(target.source.place("position", "ra")) == f"{folder.path / 'reed.yaml'}:4"


def test_all_faults_of_a_file_come_in_one_message_the_first_by_line_first(folder):
    folder.edit("reed.yaml", "sigma_days: 3", "sigma_days: -3").edit("reed.yaml", "shape: sheet", "shape: sheets")
    folder.edit("reed.yaml", "{looks: 4}", "{looks: 0}")
    with pytest.raises(InputError, match=r"sigma_days: got -3, needs a value of at least 0") as caught:
        read_campaign(folder.path)
    first, second, third = str(caught.value).splitlines()
    assert ":8, outburst.peak.sigma_days" in first
    assert second.startswith("also ")
    assert ":15, features[0].dust.shape: unknown shape 'sheets'; did you mean 'sheet'?" in second
    assert ":21, features[0].goals[1].looks: got 0, needs a value above 0" in third


def test_the_first_fault_told_is_the_first_in_the_file_whatever_the_order_of_fields(folder):
    folder.edit("moss.yaml", "redshift: 0.412\n", "").edit("moss.yaml", '"+24:08:51"', "99")
    folder.edit("moss.yaml", "target: Moss", "redshift: -1\ntarget: Moss")
    with pytest.raises(
        InputError, match=r"moss\.yaml:1, redshift: got -1, needs a value above 0\nalso .*:4, position\.dec"
    ):
        read_campaign(folder.path)


def test_at_most_ten_further_faults_are_listed(folder):
    folder.edit("reed.yaml", "source_now_mag: {V: 16.5}", "\n".join(f"odd{i}: 1" for i in range(14)))
    with pytest.raises(UnknownName, match="unknown key 'odd0'") as caught:
        read_campaign(folder.path)
    lines = str(caught.value).splitlines()
    assert len(lines) == 12
    assert lines[-1] == "and 3 more"


def test_a_misspelt_required_key_is_told_once(folder):
    folder.edit("reed.yaml", "lasting_days: 60", "lasting_day: 60")
    with pytest.raises(UnknownName, match="did you mean 'lasting_days'") as caught:
        read_campaign(folder.path)
    assert len(str(caught.value).splitlines()) == 1
    assert caught.value.nearest == "lasting_days"
    assert caught.value.value == "lasting_day"


def test_two_targets_of_one_name_are_refused(folder):
    folder.edit("moss.yaml", "target: Moss", "target: Reed")
    with pytest.raises(
        InputError, match=r"moss\.yaml:1, target: the name 'Reed' is already that of the target in .*reed\.yaml:1"
    ):
        read_campaign(folder.path)


def test_two_features_of_one_name_are_refused(folder):
    text = (folder.path / "moss.yaml").read_text()
    feature = text[text.index("  - knot") :]
    (folder.path / "moss.yaml").write_text(text + feature)
    with pytest.raises(InputError, match=r"features\[1\]\.knot: 'Moss K2' is already the name of features\[0\]"):
        read_campaign(folder.path)


def test_fixed_looks_that_overlap_on_one_telescope_are_shown_on_both_sides(folder):
    look = "  - {target: Reed, setup: hill/big, start_utc: 2027-03-01T20:29:59Z, minutes: 30}\n"
    folder.append("campaign.yaml", look)
    with pytest.raises(
        InputError,
        match=r"starts 2027-03-01T20:29:59Z, but the look at 'Reed' \(fixed_looks\[0\], line 23\) holds the same "
        r"telescope until 2027-03-01T20:30:00Z",
    ):
        read_campaign(folder.path)


def test_fixed_looks_that_touch_or_use_two_telescopes_are_allowed(folder):
    folder.append(
        "campaign.yaml",
        "  - {target: Reed, setup: hill/big, start_utc: 2027-03-01T20:30:00Z, minutes: 30}\n"
        "  - {target: Reed, setup: brack-ridge/wide-camera, start_utc: 2027-03-01T20:10:00Z, minutes: 30}\n",
    )
    assert len(read_campaign(folder.path).file.fixed_looks) == 3


def test_a_look_after_midnight_belongs_to_the_evening_before(folder):
    """The last night of the season ends on the morning after its date."""
    folder.edit("campaign.yaml", "2027-03-01T20:00:00Z", "2027-05-01T02:00:00Z")
    assert read_campaign(folder.path).file.fixed_looks[0].start_utc.day == 1


def test_a_folder_without_a_campaign_says_so_and_names_what_is_near(folder):
    (folder.path / "campaign.yaml").rename(folder.path / "campain.yaml")
    with pytest.raises(InputError, match=r"the folder holds no campaign\.yaml; did you mean 'campain\.yaml'\?"):
        read_campaign(folder.path)


def test_a_path_that_is_not_there_says_what_to_give(tmp_path):
    with pytest.raises(InputError, match=r"nowhere: there is no such file or folder; give a campaign folder"):
        read_campaign(tmp_path / "nowhere")


def test_a_site_file_must_be_a_place_or_an_array(folder):
    path = folder.path / "sites/hill.yaml"
    folder.edit("sites/hill.yaml", "site: Invented Hill", "sit: Invented Hill")
    with pytest.raises(UnknownName, match=r"hill\.yaml:1, sit: unknown key 'sit'; did you mean 'site'"):
        read_site(path)
    path.write_text("longitude_deg: 3\n")
    with pytest.raises(InputError, match="has neither 'site', 'array' nor 'spacecraft'"):
        read_site(path)
    path.write_text("- 3\n")
    with pytest.raises(InputError, match=r"hill\.yaml:1: got a list, needs a mapping of fields"):
        read_site(path)


def test_two_telescopes_of_a_site_may_not_share_a_setups_name(folder):
    more = "  two:\n    setups:\n      big: {aperture_m: 3}\n"
    path = folder.path / "sites/hill.yaml"
    path.write_text(path.read_text() + more)
    with pytest.raises(
        InputError, match=r"hill\.yaml:15, telescopes\.two\.setups\.big: telescope 'one' has a setup 'big' too"
    ):
        read_site(path)


def test_a_pair_needs_a_distance_and_its_approaching_side_the_faster(folder):
    text = """\
target: Fern
position: {ra: 250.5, dec: -3.25}
distance_pc: 5000
features:
  - pair: Fern jets
    motion:
      ejection: {date: 2026-11-26, sigma_days: 1.5}
      approaching_mas_d: {lognormal: {median: 18, sigma_fraction: 0.1}}
      receding_mas_d: 9.5
      pa_deg: 141
    flux: {mjy: 260, on: 2026-12-01, ghz: 22, fades: {exponential_days: 40}}
    goals: [{learn: beta_cos, to: 1 %}, {learn: ejection, to: 7.2 hours}]
"""
    path = folder.path / "fern.yaml"
    path.write_text(text)
    goals = read_target(path).features[0].goals
    assert (goals[1].to.value, goals[1].to.unit) == (pytest.approx(0.3, rel=1e-12), "d")
    path.write_text(text.replace("distance_pc: 5000\n", ""))
    with pytest.raises(
        InputError, match=r"fern\.yaml:4, features\[0\]\.pair: pair 'Fern jets' needs the target's distance_pc"
    ):
        read_target(path)
    path.write_text(text.replace("9.5", "19.5"))
    with pytest.raises(
        InputError,
        match=r"fern\.yaml:8, .*approaching_mas_d: got 18, needs a median above that of receding_mas_d \(19\.5\)",
    ):
        read_target(path)


def _contents(path: Path) -> dict[str, bytes]:
    return {str(p.relative_to(path)): p.read_bytes() for p in sorted(path.rglob("*")) if p.is_file()}


@pytest.mark.parametrize("case", [None, "NaN", "too few stations", "a key twice"])
def test_reading_writes_nothing_whether_it_succeeds_or_fails(folder, case):
    if case is not None:
        folder.edit(*FAULTS[case][:3])
    before = _contents(folder.path)
    try:
        read_campaign(folder.path)
        failed = False
    except InputError:
        failed = True
    assert failed == (case is not None)
    assert _contents(folder.path) == before
