"""Echoes as users write them: shapes of dust, courses of outbursts, templates, arclets; and what is refused."""

from __future__ import annotations

from pathlib import Path

import pytest

from planner.campaign.assumptions import assumptions
from planner.campaign.dust import MIX_NAMES, UNREAD_FILTERS, FilledDust, ScreenDust, SheetDust, ShellDust
from planner.campaign.light_curves import read_light_curve
from planner.campaign.quantities import QUANTITIES
from planner.campaign.reading import read_campaign
from planner.campaign.records import Arclet, OwnGrains, Ring
from planner.errors import InputError, UnknownName

DEPTH = "depth_pc: {lognormal: {median: 24, sigma_fraction: 0.25}}"
SHEET = f"      shape: sheet\n      {DEPTH}\n"
GOAL = "learn: depth_over_distance2, to: 2 %"
SEEN = "seen: {mag_arcsec2: 25.3, sigma: 0.15, filter: V, on: 2026-11-10, pa_deg: [20, 75]}"
POLARISED = "seen: {polarised_mag_arcsec2: 25.3, sigma: 0.15, filter: V, on: 2026-11-10}"
LASTING = "lasting_days: 60"

OTHER = {
    "shell": ("shape: shell\n      radius_pc: 1.5", "shell_radius_pc", ShellDust),
    "screen": ("shape: screen\n      distance_pc: 900", "dust_distance_pc", ScreenDust),
    "filled": ("shape: filled", "distance_pc", FilledDust),
}


def _shaped(folder, shape: str):
    dust, learn, _ = OTHER[shape]
    folder.edit("reed.yaml", SHEET, f"      {dust}\n").edit("reed.yaml", GOAL, f"learn: {learn}, to: 2 %")
    return folder.edit("reed.yaml", SEEN, POLARISED) if shape == "filled" else folder


def _ring(folder) -> Ring:
    ring = read_campaign(folder.path).target("Reed").features[0]
    assert isinstance(ring, Ring)
    return ring


@pytest.mark.parametrize("shape", list(OTHER))
def test_each_shape_of_dust_is_read_as_its_own_record(folder, shape):
    assert isinstance(_ring(_shaped(folder, shape)).dust, OTHER[shape][2])


def test_a_sheet_may_lie_behind_or_beside_its_source(folder):
    folder.edit("reed.yaml", DEPTH, "depth_pc: -3").edit("reed.yaml", GOAL, "learn: depth_pc, to: 0.2 pc")
    dust = _ring(folder).dust
    assert isinstance(dust, SheetDust)
    assert dust.depth_pc.median() == -3


def test_what_a_shape_assumes_is_listed_and_nothing_of_other_shapes(folder):
    fields = {a.field for a in assumptions(_shaped_target(folder, "shell"))}
    assert {"dust.thickness_pc", "dust.drift", "dust.grains", "radius_of"} <= fields
    assert "dust.tilt" not in fields


def _shaped_target(folder, shape: str):
    return read_campaign(_shaped(folder, shape).path).target("Reed")


def test_grains_are_a_name_or_the_users_own_values(folder):
    folder.edit("reed.yaml", SHEET, SHEET + "      grains: {albedo: 0.6, g: 0.7}\n")
    assert _ring(folder).dust.grains == OwnGrains(albedo=0.6, g=0.7)


# what is wrong: (old, new, piece of the line it is on, message)
FAULTS = {
    "unknown shape": (
        "shape: sheet", "shape: shel", "shape: shel",
        r"features\[0\]\.dust\.shape: unknown shape 'shel'; did you mean 'shell'\? "
        r"\(allowed: filled, screen, sheet, shell\)",
    ),
    "misspelt shape key": (
        "shape: sheet", "shap: sheet", "shap:", r"dust\.shap: unknown key 'shap'; did you mean 'shape'\?",
    ),
    "field of another shape": (
        "shape: sheet", "shape: shell", "depth_pc",
        r"dust\.depth_pc: unknown key 'depth_pc'.*\(allowed: drift, grains, radius_pc, shape, thickness_pc\)",
    ),
    "unknown grains": (
        SHEET, SHEET + "      grains: milky-way\n", "grains",
        r"dust\.grains: unknown grains 'milky-way'; did you mean 'milky_way'\? \(allowed: lmc, milky_way\)",
    ),
    "albedo above 1": (
        SHEET, SHEET + "      grains: {albedo: 1.2, g: 0.5}\n", "grains",
        r"grains\.albedo: got 1\.2, needs a value of at most 1",
    ),
    "grains that are a number": (
        SHEET, SHEET + "      grains: 3\n", "grains", r"got 3, needs a name \(milky_way, lmc\) or values such as",
    ),
    "two courses of one outburst": (
        LASTING, LASTING + "\n  pulses: [{after_days: 0, share: 1, lasting_days: 3}]", "pulses",
        r"outburst\.pulses: lasting_days and pulses say the same thing; give one of",
    ),
    "shares that miss 1": (
        LASTING, "pulses: [{after_days: 0, share: 0.5, lasting_days: 3}]", "pulses",
        r"outburst\.pulses: the shares add up to 0\.5, need 1",
    ),
    "no course": (f"  {LASTING}\n", "", "outburst:", r"outburst\.lasting_days: is missing"),
    "no peak": ("  peak_mag: {V: 7.9}\n", "", "outburst:", r"outburst\.peak_mag: is missing"),
    "the reader's own field": (
        LASTING, LASTING + "\n  curve: 3", "curve: 3", r"outburst\.curve: unknown key 'curve'",
    ),
    "missing table": (
        LASTING, "light_curve: none.csv", "light_curve", r"light curve '.*none\.csv' does not exist",
    ),
    "polarised light of a sheet": (
        SEEN, POLARISED, "polarised",
        r"brightness\.seen\.polarised_mag_arcsec2: it is no filled dust: give mag_arcsec2",
    ),
    "a colour of one filter": (
        "pa_deg: [20, 75]}", "pa_deg: [20, 75], colours: {V: 0.1}}", "colours",
        r"colours: got the colour 'V'; write two different filters, e\.g\. V-R",
    ),
    "extinction per pc of a sheet": (
        SEEN, "extinction_mag_pc: 0.1", "extinction_mag_pc", r"needs extinction_mag with dust of shape 'sheet'",
    ),
    "nothing seen": ("mag_arcsec2: 25.3, ", "", "seen:", r"brightness\.seen\.mag_arcsec2: mag_arcsec2 is missing"),
    "unknown phase": (
        "    goals:\n      - {learn: depth", "    radius_of: edge\n    goals:\n      - {learn: depth", "radius_of",
        r"radius_of: unknown radius_of 'edge'",
    ),
    "template of an unknown setup": (
        "    goals:\n      - {learn: depth",
        "    templates: [{setup: brack-ridge/wide-camra, filter: R, on: 2020-01-01, minutes: 10}]\n"
        "    goals:\n      - {learn: depth",
        "templates",
        r"features\[0\]\.templates\[0\]\.setup: unknown setup of a template 'brack-ridge/wide-camra'; did you mean",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", FAULTS)
def test_each_fault_of_an_echo_is_told_with_line_field_and_remedy(folder, case):
    old, new, piece, message = FAULTS[case]
    folder.edit("reed.yaml", old, new)
    with pytest.raises(InputError, match=message) as caught:
        read_campaign(folder.path)
    assert f"reed.yaml:{folder.line('reed.yaml', piece)}" in str(caught.value)


@pytest.mark.parametrize("shape", list(OTHER))
def test_a_quantity_that_a_shape_does_not_have_is_refused_with_those_it_has(folder, shape):
    _shaped(folder, shape).edit("reed.yaml", f"learn: {OTHER[shape][1]}", "learn: depth_over_distance2")
    with pytest.raises(
        InputError, match=rf"'depth_over_distance2' belongs to dust of shape sheet, not to a {shape}"
    ) as e:
        read_campaign(folder.path)
    assert OTHER[shape][1] in str(e.value.allowed)
    assert "depth_pc" not in str(e.value.allowed)


def test_every_shape_has_a_quantity_to_ask_for():
    for shape in ("sheet", "shell", "screen", "filled"):
        assert [q for q in QUANTITIES.values() if "ring" in q.features and shape in q.shapes]


def test_the_distance_of_a_source_at_infinity_cannot_be_asked_for(folder):
    _shaped(folder, "screen")
    folder.edit("reed.yaml", "distance_pc: 900", "distance_pc: 900\n      source_at_infinity: true")
    folder.edit("reed.yaml", "learn: dust_distance_pc", "learn: source_distance_pc")
    with pytest.raises(InputError, match=r"the source counts as infinitely far, so its distance cannot be learned"):
        read_campaign(folder.path)


def test_a_screen_needs_no_distance_of_a_source_with_a_redshift_but_other_dust_does(folder):
    distance = "distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}"
    folder.edit("reed.yaml", distance, "redshift: 0.3")
    with pytest.raises(InputError, match=r"needs the target's distance_pc \(for a source with a redshift the angular"):
        read_campaign(folder.path)
    assert isinstance(_ring(_shaped(folder, "screen")).dust, ScreenDust)


def test_a_screen_without_any_distance_of_its_source_is_told_the_two_ways_out(folder):
    folder.edit("reed.yaml", "distance_pc: {lognormal: {median: 6100, sigma_fraction: 0.12}}\n", "")
    _shaped(folder, "screen")
    with pytest.raises(InputError, match=r"needs the target's distance_pc \(or source_at_infinity: true in its dust\)"):
        read_campaign(folder.path)


def test_lmc_dust_seen_in_a_filter_without_values_is_refused_where_it_was_written(folder):
    folder.edit("reed.yaml", SHEET, SHEET + "      grains: lmc\n").edit("reed.yaml", "filter: V", "filter: B")
    folder.edit("reed.yaml", "{V: 7.9}", "{V: 7.9, B: 8.1}")
    with pytest.raises(
        InputError, match=r"seen\.filter: there are no scattering values of lmc dust for filter 'B'; give"
    ):
        read_campaign(folder.path)


def test_lmc_dust_with_a_setup_in_a_filter_without_values_needs_a_seen_colour(folder):
    folder.edit("reed.yaml", SHEET, SHEET + "      grains: lmc\n").edit("sites/hill.yaml", "filter: V", "filter: B")
    with pytest.raises(
        InputError, match=r"dust\.grains: setup hill/big uses filter 'B': there are no scattering values"
    ):
        read_campaign(folder.path)
    folder.edit("reed.yaml", "pa_deg: [20, 75]}", "pa_deg: [20, 75], colours: {B-V: 0.5}}")
    assert _ring(folder).dust.grains == "lmc"


def test_the_filters_without_values_are_those_missing_from_the_dust_tables():
    from typing import get_args

    from planner.campaign.base import Filter
    from planner.physics.dust import MIXES

    assert set(MIXES) == set(MIX_NAMES) == set(UNREAD_FILTERS)
    for name, rows in MIXES.items():
        assert {f for f in get_args(Filter) if f not in rows} == set(UNREAD_FILTERS[name])


# ------------------------------------------------------------------ light curves


CURVE = "date,filter,mag\n2021-05-10,V,9.0\n2021-05-20,V,7.9\n2021-07-01,V,9.5\n"


def test_a_light_curve_lies_beside_the_campaign_and_gives_peak_and_filters(folder):
    (folder.path / "reed.csv").write_text(CURVE, encoding="utf-8")
    folder.edit("reed.yaml", LASTING, "light_curve: reed.csv").edit("reed.yaml", "  peak_mag: {V: 7.9}\n", "")
    outburst = read_campaign(folder.path).target("Reed").outburst
    assert outburst is not None
    assert outburst.filters == ("V",)
    assert outburst.curve_of("V") == ((-10.0, 0.0, 42.0), (9.0, 7.9, 9.5))
    assert outburst.curve_of("R") is None


TABLES = {
    "empty": ("", r"the light curve is empty; it needs the columns date, filter, mag"),
    "no rows": ("date,filter,mag\n", r"the light curve has a header and no rows"),
    "unknown column": ("date,filter,magn\n", r":1: unknown column 'magn'; did you mean 'mag'\?"),
    "column twice": ("date,filter,mag,mag\n", r":1: the column 'mag' stands twice"),
    "no time": ("filter,mag\n", r":1: the header has neither date nor days"),
    "two times": ("date,days,filter,mag\n", r":1: the header has both date and days"),
    "no magnitude": ("date,filter\n", r":1: the column 'mag' is missing"),
    "short row": (CURVE + "2021-08-01,V\n", r":5: the row has 2 cells, the header 3"),
    "unknown filter": (CURVE + "2021-08-01,U,9\n", r":5, filter: unknown filter 'U'"),
    "no number": (CURVE + "2021-08-01,V,faint\n", r":5, mag: got 'faint', needs a finite number"),
    "nan": (CURVE + "2021-08-01,V,nan\n", r":5, mag: got 'nan', needs a finite number"),
    "no magnitude at all": (CURVE + "2021-08-01,V,2021\n", r":5, mag: got 2021, needs a magnitude \(allowed: -30"),
    "no date": (CURVE + "01/08/2021,V,9\n", r":5, date: got '01/08/2021'; write a date as year-month-day"),
    "same moment": ("# a remark\n" + CURVE + "2021-05-20,V,9\n", r":6: filter 'V' has a second row for the same"),
    "too few": (CURVE + "2021-05-20,R,9\n", r"filter 'R' has 1 rows, needs at least 3"),
}  # fmt: skip


@pytest.mark.parametrize("case", TABLES)
def test_a_table_that_is_no_light_curve_is_refused_with_its_row(tmp_path: Path, case):
    text, message = TABLES[case]
    path = tmp_path / "curve.csv"
    path.write_text(text, encoding="utf-8")
    with pytest.raises(InputError, match=message):
        read_light_curve(str(path))


def test_days_from_the_peak_are_read_as_they_stand(tmp_path: Path):
    path = tmp_path / "curve.csv"
    path.write_text("days,filter,mag\n5,V,9\n-5,V,8\n0,V,7\n", encoding="utf-8")
    curve = read_light_curve(str(path))
    assert curve.rows["V"] == ((-5.0, 0.0, 5.0), (8.0, 7.0, 9.0))  # sorted in time
    assert not curve.dated


def test_a_table_in_one_wrong_row_leaves_nothing_read(folder):
    (folder.path / "reed.csv").write_text(CURVE + "2021-09-01,V,x\n", encoding="utf-8")
    folder.edit("reed.yaml", LASTING, "light_curve: reed.csv")
    with pytest.raises(InputError, match=r"reed\.csv:5, mag: got 'x'"):
        read_campaign(folder.path)


# ------------------------------------------------------------------ arclets

ARCLET = """\
target: Reed
invented: true
position: {ra: "06:14:22.10", dec: "-12:31:08.0"}
distance_pc: {lognormal: {median: 3400, sigma_fraction: 0.06}}
features:
  - arclet: Reed wisp
    position: {radius_arcsec: {lognormal: {median: 4000, sigma_fraction: 0.1}}, pa_deg: {normal: {mean: 75, sigma: 10}}}
    on: 2026-09-12
    seen: {mag_arcsec2: 22.5, sigma: 0.2, filter: V}
    goals: [{learn: age_yr, to: 20 %}, {learn: source_direction_deg, to: 5 deg}]
"""


def test_an_arclet_needs_no_outburst_and_assumes_age_and_inclination_with_widths(folder):
    (folder.path / "reed.yaml").write_text(ARCLET, encoding="utf-8")
    target = read_campaign(folder.path).target("Reed")
    assert isinstance(target.features[0], Arclet)
    found = {a.field: a.value for a in assumptions(target)}
    assert found["slope"] == "0 ± 0.5"
    assert "300 ± 100 % (lognormal)" in found["age_yr"]


def test_an_age_may_be_wanted_in_years_or_days(folder):
    (folder.path / "reed.yaml").write_text(ARCLET.replace("to: 20 %", "to: 3652.5 d"), encoding="utf-8")
    arclet = read_campaign(folder.path).target("Reed").features[0]
    assert (arclet.goals[0].to.value, arclet.goals[0].to.unit) == (10.0, "yr")


def test_what_belongs_to_rings_is_refused_of_an_arclet(folder):
    text = ARCLET.replace("learn: age_yr, to: 20 %", "learn: depth_pc, to: 2 %")
    (folder.path / "reed.yaml").write_text(text, encoding="utf-8")
    with pytest.raises(
        InputError, match=r"'depth_pc' belongs to a ring, not to an arclet \(allowed: distance_pc, age_yr"
    ):
        read_campaign(folder.path)


def test_unknown_names_carry_the_nearest(folder):
    folder.edit("reed.yaml", "shape: sheet", "shape: scren")
    with pytest.raises(UnknownName) as caught:
        read_campaign(folder.path)
    assert caught.value.nearest == "screen"
