"""Trajectories inside the observation model: derivatives, limits where one kind becomes another, published jets."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_jets import APPARENT, FAR, INTRINSIC, KINDS, LINEAR, NOZZLE, PRECESSING, STATIONARY, knot

from planner.errors import InputError
from planner.physics import jet, jet_paths
from planner.prediction.coordinates import Number
from planner.prediction.core import bend, curve_years
from planner.prediction.knots import KnotModel
from planner.prediction.model import STEP, TargetModel
from planner.prediction.paths import ApparentPath, IntrinsicPath, NozzlePath, StationaryPath
from planner.prediction.quantities import QUANTITIES
from planner.prediction.scale import Scale, build_scale
from planner.units import YEAR_DAYS, mjd_of_date

MJD = mjd_of_date("2027-01-04") + np.array([1.0, 40.0, 101.5, 177.0])
Make = Callable[..., TargetModel]


def middle(model: TargetModel) -> np.ndarray:
    """Prior mean of the coordinates, one draw."""
    return np.concatenate([b.moments()[0] for b in model.blocks])[None, :]


def fixed(**changes: Any) -> dict[str, Any]:
    """A nozzle of known numbers: those of SS 433 (Niell et al., IAU Symposium; period from Davies)."""
    return {
        "period_days": 162, "half_angle_deg": 20, "inclination_deg": 79, "axis_pa_deg": 98, "phase_deg": 0,
        "phase_on": "2026-10-20", "beta": 0.26, **changes,
    }  # fmt: skip


def quantity(model: TargetModel, feature: str, name: str, theta: np.ndarray) -> np.ndarray:
    found = model.feature(feature)
    return QUANTITIES[(found.kind, name)](model, found, theta)


@pytest.mark.parametrize("setup", [None, "cairn-array/43ghz", "cairn-array/22ghz"])
@pytest.mark.parametrize("kind", list(KINDS))
def test_derivatives_by_every_coordinate_agree_with_richardson_extrapolation(
    jet_model: Make, kind: str, setup: str | None
) -> None:
    """Two halvings extrapolated are good to about 1e-10; what is left is rounding of the observable over the step."""
    features, target = KINDS[kind]
    model = jet_model(*features, **target)
    theta = model.belief(4, 3, "test").draws
    found = model.derivatives(theta, MJD, setup)
    for j in range(model.size):
        shift = np.zeros(model.size)
        estimates = []
        for h in (2e-3, 1e-3):
            shift[j] = h * model.sigma[j]
            high, low = model.observe(theta + shift, MJD, setup), model.observe(theta - shift, MJD, setup)
            estimates.append((high - low) / (2 * h * model.sigma[j]))
        exact = (4 * estimates[1] - estimates[0]) / 3
        rounding = 20 * np.finfo(float).eps * np.abs(high).max() / (STEP * model.sigma[j])
        limit = 1e-6 * np.abs(exact).max() + rounding + 1e-12
        assert found[..., j] == pytest.approx(exact, abs=limit), model.blocks[0].names
    assert np.abs(found).max() > 0


def test_a_bend_is_the_integral_of_a_constant_acceleration() -> None:
    """Twin: velocity v + a (t - t_ref), added up in small steps from the start."""
    start, reference, end = np.array([[100.0]]), 400.0, 900.0
    t = np.linspace(100.0, end, 200_001)
    v = np.array([0.3, -0.2])
    a = np.hypot(*v) * (0.1 * v / np.hypot(*v) + 0.05 * np.array([v[1], -v[0]]) / np.hypot(*v))  # per year
    steps = v[:, None] + a[:, None] * (0.5 * (t[1:] + t[:-1]) - reference) / YEAR_DAYS
    plain = (steps * np.diff(t) / YEAR_DAYS).sum(axis=1)
    curve = curve_years(np.array([end]), start, reference)
    years = (np.array([end]) - start) / YEAR_DAYS
    found = bend(v[None, :], years, curve, np.array([[0.1]]), np.array([[0.05]]))[0, 0]
    assert found == pytest.approx(plain, rel=1e-9)


def test_an_accelerated_knot_agrees_with_the_physics_of_paths(jet_model: Make) -> None:
    model = jet_model(knot("A", APPARENT))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    assert isinstance(feature.path, ApparentPath)
    theta = model.belief(16, 1, "test").draws
    v = feature.velocity_mas_yr(theta)
    speed = feature.speed_mas_yr(theta)[:, None]
    along, across = (n.value(theta) * speed for n in (feature.path.along, feature.path.across))
    expected = jet_paths.accelerated(
        MJD, feature.crossing_mjd(theta), speed, np.degrees(np.arctan2(v[:, :1], v[:, 1:])), along, -across,
        feature.path.reference_mjd,
    )  # fmt: skip
    # "across" of the physics is positive toward smaller position angle, that of a belief toward larger
    found = feature.offset_mas(theta, MJD)
    assert found[..., 0] == pytest.approx(np.asarray(expected.east_mas), abs=1e-11)
    assert found[..., 1] == pytest.approx(np.asarray(expected.north_mas), abs=1e-11)


@pytest.mark.parametrize("motion", [APPARENT, LINEAR, INTRINSIC])
def test_a_motion_without_acceleration_is_straight_and_even(jet_model: Make, motion: dict[str, Any]) -> None:
    model = jet_model(knot("A", {**motion, "acceleration_fraction_yr": 0}))
    theta = model.belief(8, 1, "test").draws
    at = model.observe(theta, np.array([61500.0, 61560.0, 61620.0]))
    assert at[:, 1] - at[:, 0] == pytest.approx(at[:, 2] - at[:, 1], abs=1e-12)


def test_a_linear_knot_passes_its_point_and_never_crosses_a_core(jet_model: Make) -> None:
    model = jet_model(knot("L", LINEAR))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    there = feature.observe(middle(model), np.array([mjd_of_date("2026-11-01") + 0.5]))[0, 0]
    assert there == pytest.approx([-0.3, 0.2], abs=1e-12)
    early = feature.spot_states(middle(model), np.array([mjd_of_date("2020-01-01")]))[0]
    assert early.exists.all()
    assert np.isnan(feature.crossing_mjd(middle(model))).all()
    after = feature.observe(middle(model), np.array([mjd_of_date("2026-11-01") + 0.5 + YEAR_DAYS]))[0, 0] - there
    assert np.degrees(np.arctan2(*after)) == pytest.approx(20.0, abs=0.2)  # its own direction, not that of its place
    assert abs(np.degrees(np.arctan2(*there)) - 20.0) > 60.0


@given(beta=st.floats(0.05, 0.995), angle=st.floats(1.0, 179.0), t0=st.floats(0.0, 300.0))
@settings(max_examples=40, deadline=None)
def test_intrinsic_and_apparent_motions_go_round(beta: float, angle: float, t0: float) -> None:
    """A knot of true speed and angle moves as one of the apparent speed that follows, at z = 0.412."""
    one = 32.0  # mas/yr per c is irrelevant: any constant scale must cancel
    zero = Number(None, False, 0.0)

    def known(value: float) -> Number:
        return Number(None, False, value)

    true = IntrinsicPath(
        61000.0, known(t0), known(np.arctanh(beta)), known(angle), known(-62.0), zero, zero, Scale(None, one), 61500.0,
        -62.0,
    )  # fmt: skip
    apparent = float(jet.apparent_speed_c(beta, angle)) * one
    pa = np.radians(-62.0)
    theta = np.array([[apparent * np.sin(pa), apparent * np.cos(pa)]])
    seen = ApparentPath(61000.0, known(t0), (0, 1), zero, zero, 61500.0, -62.0)
    assert true.offset_mas(theta, MJD) == pytest.approx(seen.offset_mas(theta, MJD), rel=1e-9, abs=1e-9)


@given(phase=st.floats(-720.0, 720.0), sense=st.sampled_from([1, -1]))
@settings(max_examples=25, deadline=None)
def test_a_nozzle_that_does_not_swing_throws_along_its_axis(jet_model: Make, phase: float, sense: int) -> None:
    motion = {"nozzle": fixed(half_angle_deg=0, phase_deg=phase, sense=sense), "ejection": PRECESSING["ejection"]}
    model = jet_model(knot("N", motion), distance_pc=5000)
    feature = model.features[0]
    theta = middle(model)
    at = feature.observe(theta, MJD)[0]
    assert np.degrees(np.arctan2(at[:, 0], at[:, 1])) == pytest.approx(np.full(4, 98.0), abs=1e-9)
    speed = quantity(model, "N", "apparent_speed_c", theta)
    assert speed == pytest.approx([float(jet.apparent_speed_c(0.26, 79.0))], rel=1e-12)


# b 0.26, cone 20 deg, inclination 79 deg (Niell et al., SS 433), 5 kpc: motions of both sides and angle at phases 0,
# 90, 180, 270, from the closed form with independent arithmetic (see tests/physics for the line shifts).
SS433 = {0: (59.0, 8.9108, 6.8061, 0.0), 90: (79.671, 9.2907, 8.4631, 20.344), 180: (99.0, 8.5451, 9.2697, 0.0)}


@pytest.mark.parametrize("phase", list(SS433))
def test_a_precessing_nozzle_reproduces_both_sides_of_ss_433(jet_model: Make, phase: int) -> None:
    angle, near, far, swing = SS433[phase]
    model = jet_model(
        knot("N", {"nozzle": fixed(phase_deg=phase), "ejection": {"date": "2026-10-20", "sigma_days": 0}}),
        knot("C", {"side": "receding", "of": "N"}),
        distance_pc=5000,
    )
    theta = middle(model)
    assert quantity(model, "N", "angle_deg", theta) == pytest.approx([angle], abs=1e-3)
    assert quantity(model, "N", "speed_mas_yr", theta) / YEAR_DAYS == pytest.approx([near], abs=1e-4)
    assert quantity(model, "C", "speed_mas_yr", theta) / YEAR_DAYS == pytest.approx([far], abs=1e-4)
    assert quantity(model, "N", "pa_deg", theta) == pytest.approx([98.0 + swing], abs=1e-3)
    at = model.observe(theta, np.array([mjd_of_date("2026-10-30") + 0.5]))[0, 0]  # ten days after the ejection
    assert np.hypot(at[0], at[1]) == pytest.approx(10 * near, abs=1e-3)
    assert np.hypot(at[2], at[3]) == pytest.approx(10 * far, abs=1e-3)
    assert at[:2] @ at[2:] < 0
    doppler = quantity(model, "N", "doppler_factor", theta)
    # 1 / (1 + z) of the lines: z -0.10306 at phase 0, +0.07774 at 180 (closed form)
    if phase in (0, 180):
        assert 1 / doppler - 1 == pytest.approx([-0.10306 if phase == 0 else 0.07774], abs=1e-5)


def test_a_quarter_period_later_the_nozzle_points_a_quarter_turn_further(jet_model: Make) -> None:
    """Ejection 40.5 days after phase 0 with a period of 162 days is phase 90; the other spin swings the other way."""
    for sense in (1, -1):
        motion = {"nozzle": fixed(sense=sense), "ejection": {"date": "2026-11-29", "sigma_days": 0}}
        model = jet_model(knot("N", motion), distance_pc=5000)
        path = model.features[0].path  # type: ignore[union-attr]
        assert isinstance(path, NozzlePath)
        turned = 98.0 + sense * float(jet_paths.precessing(0.26, 79, 20, 360 * 40 / 162).pa_offset_deg)
        assert quantity(model, "N", "pa_deg", middle(model)) == pytest.approx([turned], abs=1e-9)


def test_knots_of_one_nozzle_share_its_numbers_and_keep_their_own_dates(jet_model: Make) -> None:
    features, target = KINDS["nozzle"]
    model = jet_model(*features, **target)
    names = [n for b in model.blocks for n in b.names]
    assert sum("period_days" in n for n in names) == 1
    assert {"N1/ejection", "N2/ejection"} <= set(names)
    theta = model.belief(64, 1, "test").draws
    periods = [quantity(model, n, "period_days", theta) for n in ("N1", "N2")]
    assert np.array_equal(*periods)
    gap = quantity(model, "N2", "ejection", theta) - quantity(model, "N1", "ejection", theta)
    assert np.mean(gap) == pytest.approx(31.0, abs=0.5)  # a scrambled mean of 64 draws of width 4.2
    assert np.ptp(gap) > 5.0


def test_a_counter_knot_shares_speed_angle_and_ejection_and_goes_the_other_way(jet_model: Make) -> None:
    features, target = KINDS["counter-knot"]
    model = jet_model(*features, **target)
    theta = model.belief(32, 1, "test").draws
    one, other = model.feature("I"), model.feature("C")
    assert isinstance(one, KnotModel)
    assert isinstance(other, KnotModel)
    assert isinstance(one.path, IntrinsicPath)
    assert np.array_equal(one.crossing_mjd(theta), other.crossing_mjd(theta))
    beta, angle = one.path.beta(theta)[:, 0], one.path.angle_deg(theta)[:, 0]
    scale = build_scale(model.target, None).mas_yr_per_c(theta)[:, 0]
    assert other.speed_mas_yr(theta) == pytest.approx(jet.receding_speed_c(beta, angle) * scale, rel=1e-12)
    turned = quantity(model, "C", "pa_deg", theta) - quantity(model, "I", "pa_deg", theta)
    assert turned == pytest.approx(np.full(32, 180.0), abs=1e-9)
    assert quantity(model, "C", "doppler_factor", theta) == pytest.approx(
        np.asarray(jet.doppler_factor(beta, 180.0 - angle)), rel=1e-12
    )


def test_a_stationary_feature_jitters_about_its_place_and_teaches_no_speed(jet_model: Make) -> None:
    model = jet_model(knot("S", STATIONARY))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    assert isinstance(feature.path, StationaryPath)
    theta = middle(model)
    place = feature.observe(theta, MJD)[0]
    assert np.hypot(place[:, 0], place[:, 1]) == pytest.approx(np.full(4, 0.4), rel=1e-9)
    theta[0, feature.path.jitter.north[1]] = 0.03
    moved = feature.observe(theta, MJD)[0] - place
    assert moved == pytest.approx(np.array([[0, 0], [0, 0.03], [0, 0], [0, 0]]), abs=1e-15)  # the second 30 days only
    assert quantity(model, "S", "separation_mas", theta) == pytest.approx([0.4], rel=1e-3)
    for name in ("apparent_speed_c", "speed_mas_yr", "core_crossing", "beta", "doppler_factor", "period_days"):
        assert np.isnan(quantity(model, "S", name, theta)).all(), name


def test_a_stated_beta_that_no_angle_allows_is_refused_with_the_numbers_and_the_line(jet_model: Make) -> None:
    motion = {**APPARENT, "beta": 0.9}  # gamma beta = 2.06; 0.3 mas/yr at z 0.412 is about 7.5 c
    why = r"A: apparent speed 7\.\d+ c is above gamma\*beta = 2\.065 c.*it needs beta of at least 0\.99.*raise beta"
    with pytest.raises(InputError, match=r"features\[0\]\.motion\.beta: " + why):
        jet_model(knot("A", motion))
    assert jet_model(knot("A", {**APPARENT, "beta": 0.995})).size > 0


def test_the_rates_of_gro_j1655_40_give_its_published_speed_and_angle_through_a_pair(jet_model: Make) -> None:
    """54 and 45.5 mas/d at 3.2 kpc: beta cos .08543, D_max 3.493 kpc, 84.65 deg, .9167 (published: 0.92, 85 deg).

    Source: review table of Mirabel & Rodriguez, NED level 5. The rates go in and out again: a round trip of the
    positions, and a check of the derived quantities.
    """
    motion = {
        "ejection": {"date": "2026-11-26", "sigma_days": 2},
        "approaching_mas_d": {"lognormal": {"median": 50, "sigma_fraction": 0.2}},
        "receding_mas_d": {"lognormal": {"median": 44, "sigma_fraction": 0.2}},
        "pa_deg": {"normal": {"mean": 47, "sigma": 3}}, "acceleration_fraction_yr": 0,
    }  # fmt: skip
    flux = {"mjy": 500, "on": "2026-12-01", "ghz": 22, "fades": {"exponential_days": 40}}
    model = jet_model({"pair": "P", "motion": motion, "flux": flux}, distance_pc=3200)
    names = [n for b in model.blocks for n in b.names]
    theta = middle(model)
    theta[0, names.index("ln P/approaching_mas_d")] = np.log(54.0)
    theta[0, names.index("ln P/receding_mas_d")] = np.log(45.5)
    days = np.array([1.0, 4.0, 9.0, 20.0])
    at = model.observe(theta, mjd_of_date("2026-11-26") + 0.5 + days)[0]
    near, far = np.hypot(at[:, 0], at[:, 1]), np.hypot(at[:, 2], at[:, 3])
    rates = [np.polyfit(days, r, 1)[0] for r in (near, far)]
    assert rates == pytest.approx([54.0, 45.5], rel=1e-9)  # round trip
    expected = {"beta_cos": 0.08543, "angle_deg": 84.653, "beta": 0.91674, "largest_distance_kpc": 3.493}
    for name, value in expected.items():
        assert quantity(model, "P", name, theta) == pytest.approx([value], rel=2e-4), name
    assert quantity(model, "P", "beta", theta)[0] == pytest.approx(0.92, abs=0.005)  # published, its last digit
    assert quantity(model, "P", "angle_deg", theta)[0] == pytest.approx(85.0, abs=0.5)


# 3C 454.3, z = 0.859, 0.039 mas/yr, H0 = 71, Om = 0.27: a published abstract says 1.0 c, which leaves out 1 + z.
@pytest.mark.parametrize(
    ("redshift", "cosmology", "mas_yr", "expected", "without"),
    [
        (0.859, {"h0_km_s_mpc": 71, "omega_matter": 0.27}, 0.039, 1.821, 0.980),
        # 3C 345 C8, Ros et al. 2000 (astro-ph/9901204 rows): 5.1 c with H0 = 100, q0 = 0.5
        (0.595, {"h0_km_s_mpc": 100, "omega_matter": 1.0, "omega_lambda": 0}, 0.26, 5.132, 3.218),
        (1.037, {"h0_km_s_mpc": 100, "omega_matter": 1.0, "omega_lambda": 0}, 0.65, 18.447, 9.056),  # CTA 102
    ],
)
def test_one_plus_z_stands_where_it_belongs_from_file_to_goal(
    jet_model: Make, redshift: float, cosmology: dict[str, float], mas_yr: float, expected: float, without: float
) -> None:
    motion = {**APPARENT, "speed_mas_yr": mas_yr}
    model = jet_model(knot("A", motion), redshift=redshift, cosmology=cosmology)
    found = quantity(model, "A", "apparent_speed_c", model.belief(4, 1, "test").draws)
    assert found == pytest.approx(np.full(4, expected), rel=5e-4)
    assert abs(found[0] / without - 1) > 0.5
    assert found[0] / without == pytest.approx(1 + redshift, rel=1e-3)


def test_a_cosmology_is_taken_by_its_name(jet_model: Make) -> None:
    import astropy.cosmology

    for name in ("Planck18", "WMAP5"):
        model = jet_model(knot("A", {**APPARENT, "speed_mas_yr": 0.3}), cosmology=name)
        d_m = getattr(astropy.cosmology, name).comoving_transverse_distance(0.412).to_value("Gpc")
        # 1 mas/yr at a comoving distance of 1 Gpc is 15.812507 c (closed form)
        found = quantity(model, "A", "apparent_speed_c", model.belief(4, 1, "test").draws)
        assert found == pytest.approx(np.full(4, 15.812507 * 0.3 * d_m), rel=1e-6)


def test_fixed_numbers_take_no_coordinate_and_true_speed_has_no_limit_to_run_into(jet_model: Make) -> None:
    model = jet_model(knot("I", {**INTRINSIC, "intrinsic": {"beta": 0.99, "angle_deg": 5}}))
    assert not any("rapidity" in n or "angle" in n for b in model.blocks for n in b.names)
    fast = {
        "lorentz_factor": {"uniform": {"low": 1.001, "high": 60}},
        "angle_deg": {"uniform": {"low": 0.1, "high": 90}},
    }
    model = jet_model(knot("I", {**INTRINSIC, "intrinsic": fast}))
    theta = model.belief(512, 1, "test").draws
    beta = quantity(model, "I", "beta", theta)
    assert 0 < beta.min() < 0.3
    assert 0.999 < beta.max() < 1
    assert np.isfinite(model.derivatives(theta, MJD)).all()


def test_nozzle_and_far_target_share_the_distance(jet_model: Make) -> None:
    model = jet_model(knot("N", {**PRECESSING, "nozzle": NOZZLE}), **FAR)
    theta = middle(model)
    names = [n for b in model.blocks for n in b.names]
    nearer = theta.copy()
    nearer[0, names.index("ln distance_pc")] -= np.log(2.0)
    assert model.observe(nearer, MJD) == pytest.approx(2 * model.observe(theta, MJD), rel=1e-9)  # mas go as 1/distance
