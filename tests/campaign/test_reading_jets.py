"""Every kind of jet motion and fading is read from a folder; an error speaks of the kind that was meant."""

from __future__ import annotations

import pytest

from planner.campaign.assumptions import assumptions
from planner.campaign.reading import read_campaign
from planner.campaign.records import (
    Cosmology,
    CounterMotion,
    IntrinsicMotion,
    KnotMotion,
    LinearMotion,
    NamedCosmology,
    NozzleMotion,
    StationaryMotion,
)
from planner.campaign.targets import COSMOLOGIES
from planner.errors import InputError, UnknownName

MOTION = """\
      core_crossing: {date: 2026-06-10, sigma_days: 60, at_ghz: 43}
      speed_mas_yr: {lognormal: {median: 0.31, sigma_fraction: 0.2}}
      pa_deg: {normal: {mean: -62, sigma: 4}}
"""
GOALS = """\
      - {learn: apparent_speed_c, to: 15 %}
      - {learn: core_crossing, to: 45 d}
"""
LINEAR = """\
      passes: {on: 2026-11-01, east_mas: {normal: {mean: -0.3, sigma: 0.02}}, north_mas: 0.2}
      speed_mas_yr: 0.3
      pa_deg: 20
"""
INTRINSIC = """\
      core_crossing: {date: 2026-06-10, sigma_days: 60, at_ghz: 43}
      intrinsic: {lorentz_factor: {lognormal: {median: 12, sigma_fraction: 0.2}}, angle_deg: 5}
      pa_deg: -62
"""
NOZZLE = """\
      ejection: {date: 2026-06-10, sigma_days: 6}
      nozzle:
        period_days: {normal: {mean: 162, sigma: 1}}
        half_angle_deg: 20
        inclination_deg: 79
        axis_pa_deg: 98
        phase_deg: {normal: {mean: 40, sigma: 10}}
        phase_on: 2026-09-01
        beta: 0.26
""".replace("{normal: {mean: 162, sigma: 1}}", "{lognormal: {median: 162, sigma_fraction: 0.01}}")
STATIONARY = """\
      stationary: {separation_mas: {lognormal: {median: 0.4, sigma_fraction: 0.1}}, pa_deg: -62}
"""
COUNTER = """
  - knot: Moss C2
    motion: {side: receding, of: Moss K2}
    flux: {mjy: 2, on: 2026-10-01, ghz: 43, fades: {exponential_days: 260}}
"""
KINDS = {
    "apparent": (MOTION, "[{learn: largest_angle_deg, to: 1 deg}]", KnotMotion),
    "linear": (LINEAR, "[{learn: speed_mas_yr, to: 5 %}]", LinearMotion),
    "intrinsic": (INTRINSIC, "[{learn: angle_deg, to: 1 deg}, {learn: doppler_factor, to: 10 %}]", IntrinsicMotion),
    "nozzle": (NOZZLE, "[{learn: ejection, to: 2 d}, {learn: period_days, to: 1 %}]", NozzleMotion),
    "stationary": (STATIONARY, "[{learn: separation_mas, to: 30 uas}]", StationaryMotion),
}


def with_motion(folder, motion, goals="[{looks: 3}]"):
    folder.edit("moss.yaml", MOTION, motion)
    return folder.edit("moss.yaml", "    goals:\n" + GOALS, f"    goals: {goals}\n")


def flux(folder, text):
    return folder.edit("moss.yaml", "{mjy: 180, on: 2026-10-01, ghz: 43, fades: {exponential_days: 260}}", text)


@pytest.mark.parametrize("kind", list(KINDS))
def test_each_kind_of_motion_is_read_with_goals_of_its_own(folder, kind):
    motion, goals, record = KINDS[kind]
    (knot,) = read_campaign(with_motion(folder, motion, goals).path).target("Moss").features
    assert type(knot.motion) is record


def test_a_counter_knot_names_its_knot_before_or_after_it(folder):
    with_motion(folder, INTRINSIC).append("moss.yaml", COUNTER.lstrip("\n"))
    _, counter = read_campaign(folder.path).target("Moss").features
    assert isinstance(counter.motion, CounterMotion)


FAULTS = {
    "two kinds": (
        LINEAR + "      stationary: {separation_mas: 1, pa_deg: 3}\n",
        r"motion: has passes and stationary; a motion is of one kind",
    ),
    "misspelt kind": (
        LINEAR.replace("passes", "pases").replace("speed_mas_yr: 0.3", "on: 3"),
        r"did you mean 'passes'",
    ),
    "misspelt key": (LINEAR.replace("north_mas", "nort_mas"), r"motion\.passes\.nort_mas: .*did you mean 'north_mas'"),
    "key of another kind": (
        LINEAR + "      core_crossing: {date: 2026-06-10, sigma_days: 60, at_ghz: 43}\n",
        r"motion\.core_crossing: unknown key 'core_crossing' \(allowed: acceleration_fraction_yr, pa_deg, passes",
    ),
    "no speed": (MOTION.replace("speed_mas_yr", "#"), r"motion\.speed_mas_yr: is missing"),
    "two speeds": (INTRINSIC.replace("angle_deg", "beta: 0.9, angle_deg"), r"both beta and lorentz_factor; give one"),
    "beta above 1": (
        INTRINSIC.replace("lorentz_factor: {lognormal: {median: 12, sigma_fraction: 0.2}}", "beta: 1.2"),
        r"intrinsic\.beta: got a speed of 1\.2 \(fixed\), needs every value above 0 and below 1",
    ),
    "Lorentz factor that reaches 1": (
        INTRINSIC.replace("median: 12", "median: 1.5"),
        r"lorentz_factor: got a Lorentz factor of 1\.5 .*needs every value above 1.*truncated_normal",
    ),
    "angle behind us": (
        INTRINSIC.replace("angle_deg: 5", "angle_deg: 190"),
        r"needs every value above 0 and below 180",
    ),
    "wide cone": (NOZZLE.replace("half_angle_deg: 20", "half_angle_deg: 95"), r"a half angle of 95 .*below 90"),
    "sense": (NOZZLE + "        sense: 2\n", r"motion\.nozzle\.sense: .*1, -1|1 or -1"),
    "nozzle of a stranger": (
        "      ejection: {date: 2026-06-10, sigma_days: 6}\n      nozzle: Moss K9\n",
        r"motion\.nozzle: got 'Moss K9', which is no knot of this target that states the numbers of a nozzle",
    ),
    "stated beta out of range": (MOTION + "      beta: 0\n", r"motion\.beta: got a speed of 0"),
}  # fmt: skip


@pytest.mark.parametrize("case", list(FAULTS))
def test_a_fault_speaks_only_of_the_kind_that_was_meant(folder, case):
    motion, message = FAULTS[case]
    with_motion(folder, motion)
    with pytest.raises(InputError, match=message) as caught:
        read_campaign(folder.path)
    assert "moss.yaml:" in str(caught.value)
    assert len(str(caught.value).splitlines()) == 1, str(caught.value)


COUNTERS = {
    "an apparent one": (MOTION, "Moss K2", r"'Moss K2' does not state its true speed and angle.*write intrinsic there"),
    "nobody": (INTRINSIC, "Moss K7", r"of: got 'Moss K7', which is no knot of this target \(allowed: Moss K2\)"),
}


@pytest.mark.parametrize("case", list(COUNTERS))
def test_a_counter_knot_needs_a_knot_of_known_speed_and_angle(folder, case):
    motion, name, message = COUNTERS[case]
    with_motion(folder, motion).append("moss.yaml", COUNTER.lstrip("\n").replace("of: Moss K2", f"of: {name}"))
    with pytest.raises(InputError, match=message):
        read_campaign(folder.path)


@pytest.mark.parametrize(
    ("motion", "quantity", "to"),
    [
        (STATIONARY, "apparent_speed_c", "5 %"),
        (LINEAR, "core_crossing", "5 d"),
        (MOTION, "doppler_factor", "5 %"),
        (MOTION, "angle_deg", "5 deg"),
        (INTRINSIC, "period_days", "5 d"),
        (NOZZLE, "core_crossing", "5 d"),
    ],
)
def test_a_quantity_that_the_motion_does_not_have_is_refused_with_those_it_has(folder, motion, quantity, to):
    with_motion(folder, motion, f"[{{learn: {quantity}, to: {to}}}]")
    with pytest.raises(
        InputError, match=rf"goals\[0\]\.learn: '{quantity}' means nothing for this motion \(.*allowed: "
    ):
        read_campaign(folder.path)


def test_a_crossing_may_be_wanted_at_another_frequency_and_nothing_else_may(folder):
    folder.edit("moss.yaml", "{learn: core_crossing, to: 45 d}", "{learn: core_crossing, to: 45 d, at_ghz: 15}")
    goal = read_campaign(folder.path).target("Moss").features[0].goals[1]
    assert (goal.at_ghz, goal.words) == (15, "core_crossing at 15 GHz to 45 d")
    folder.edit("moss.yaml", "to: 15 %}", "to: 15 %, at_ghz: 15}")
    with pytest.raises(InputError, match=r"at_ghz: got 15, but only core_crossing depends on a frequency"):
        read_campaign(folder.path)


# ------------------------------------------------------------------ flux


@pytest.mark.parametrize(
    "fades",
    [
        "{exponential_days: 260}",
        "{power_law: {index: 1.3, with: distance}}",
        "{power_law: {index: 2, with: age}}",
        "{adiabatic: {electron_index: 2.5}}",
        "{adiabatic: {electron_index: 2.2, peak_ghz: 30}}",
    ],
)
def test_each_fading_law_is_read(folder, fades):
    flux(folder, f"{{mjy: 180, on: 2026-10-01, ghz: 43, fades: {fades}}}")
    knot = read_campaign(folder.path).target("Moss").features[0]
    assert knot.flux.start_mjy == 180


FLUXES = {
    "no law": (
        MOTION,
        "{mjy: 1, on: 2026-10-01, ghz: 43, fades: {}}",
        r"flux\.fades: says no law; give exactly one of",
    ),
    "two laws": (
        MOTION,
        "{mjy: 1, on: 2026-10-01, ghz: 43, fades: {exponential_days: 3, adiabatic: {electron_index: 2}}}",
        r"flux\.fades: has exponential_days and adiabatic; give exactly one",
    ),
    "with what": (
        MOTION,
        "{mjy: 1, on: 2026-10-01, ghz: 43, fades: {power_law: {index: 1, with: distanc}}}",
        r"fades\.power_law\.with: unknown with 'distanc'; did you mean 'distance'\?",
    ),
    "no flux": (MOTION, "{on: 2026-10-01, ghz: 43, fades: {exponential_days: 3}}", r"neither mjy nor rest_mjy"),
    "rest flux without a true speed": (
        MOTION,
        "{rest_mjy: 1, on: 2026-10-01, ghz: 43, fades: {exponential_days: 3}}",
        r"flux\.rest_mjy: rest_mjy needs the true speed and the angle.*write mjy, or state intrinsic or nozzle",
    ),
    "an age without an ejection": (
        STATIONARY,
        "{mjy: 1, on: 2026-10-01, ghz: 43, fades: {adiabatic: {electron_index: 2}}}",
        r"flux\.fades: this fading counts from the ejection, which this motion \(stationary\) does not have",
    ),
    "a distance that stays": (
        STATIONARY,
        "{mjy: 1, on: 2026-10-01, ghz: 43, fades: {power_law: {index: 2, with: distance}}}",
        r"flux\.fades: a stationary feature keeps its distance; use exponential_days",
    ),
}


@pytest.mark.parametrize("case", list(FLUXES))
def test_a_flux_that_says_too_little_or_too_much_is_refused(folder, case):
    motion, text, message = FLUXES[case]
    flux(with_motion(folder, motion), text)
    with pytest.raises(InputError, match=message):
        read_campaign(folder.path)


# ------------------------------------------------------------------ the target


def test_a_cosmology_is_numbers_or_a_name_that_astropy_knows(folder):
    import astropy.cosmology

    assert set(COSMOLOGIES) == set(astropy.cosmology.available)
    assert isinstance(read_campaign(folder.path).target("Moss").cosmology, Cosmology)
    folder.edit("moss.yaml", "redshift: 0.412", "redshift: 0.412\ncosmology: Planck18")
    campaign = read_campaign(folder.path)
    assert campaign.target("Moss").cosmology == NamedCosmology(name="Planck18")
    assert not any(a.field.startswith("cosmology") for a in assumptions(campaign))
    folder.edit("moss.yaml", "Planck18", "Plank18")
    with pytest.raises(
        UnknownName, match=r"moss\.yaml:5, cosmology: unknown cosmology 'Plank18'; did you mean 'Planck18'"
    ):
        read_campaign(folder.path)
    folder.edit("moss.yaml", "Plank18", "{h0_km_s_mpc: -3}")
    with pytest.raises(InputError, match=r"moss\.yaml:5, cosmology\.h0_km_s_mpc: got -3"):
        read_campaign(folder.path)


def test_widths_that_no_one_stated_are_listed_with_their_origin(folder):
    listed = {a.field: a for a in assumptions(read_campaign(folder.path)) if a.owner.startswith("target Moss")}
    assert listed["nuisances.core_shift_mas_ghz"].value == "1.86 ± 70 % (lognormal)"
    assert "arXiv:1103.6032" in listed["nuisances.core_shift_mas_ghz"].why
    assert listed["nuisances.flux_scale_fraction"].value == "0.07"
    assert listed["grows"].value == "0.1"


def test_scattering_and_a_known_core_shift_are_read(folder):
    more = "redshift: 0.412\nscatter_mas: {at_ghz: 8.4, mas: 1.9}\nnuisances: {core_shift_mas_ghz: 1.2}"
    folder.edit("moss.yaml", "redshift: 0.412", more)
    target = read_campaign(folder.path).target("Moss")
    assert target.scatter_mas.mas == 1.9
    assert target.nuisances.core_shift_mas_ghz.fixed


def test_a_stationary_feature_needs_no_distance(folder):
    with_motion(folder, STATIONARY).edit("moss.yaml", "redshift: 0.412\n", "")
    assert read_campaign(folder.path).target("Moss").redshift is None
