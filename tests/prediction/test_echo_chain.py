"""Echoes through the whole chain: recovered depths, the known degeneracy, and a plan for every shape of dust."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from echo_campaigns import CAMPAIGN, DUST, HEAD, SEEN, arclet_text, campaign_in, model_in, ring_text

from planner import flow
from planner.campaign.records import Campaign, LearnGoal
from planner.physics import echo
from planner.prediction.information import gathered, information
from planner.prediction.model import TargetModel, build_model
from planner.prediction.quantities import wanted
from planner.prediction.rings import RingModel
from planner.records import silent
from planner.schedule.promise import season_reach, unreachable
from planner.units import LY_PC, mjd_of_date

RADIUS_ARCSEC = 0.05  # error of one sector radius in these trials
YEAR = mjd_of_date("1988-02-01") + np.linspace(0.0, 365.0, 24)


# ------------------------------------------------------------------ recovered depths


def _mean(model: TargetModel) -> np.ndarray:
    return np.concatenate([block.moments()[0] for block in model.blocks])[None, :]


def _fit(model: TargetModel, radii: np.ndarray, mjd: np.ndarray) -> np.ndarray:
    """Most probable coordinates given sector radii (T, M) with known errors: Gauss-Newton from the prior's mean."""
    start, prior = _mean(model)[0], np.linalg.inv(model.belief_covariance)
    theta = start.copy()
    for _ in range(12):
        rows = model.derivatives(theta[None], mjd)[0].reshape(-1, model.size) / RADIUS_ARCSEC
        misfit = (radii - model.observe(theta[None], mjd)[0]).ravel() / RADIUS_ARCSEC
        gradient = rows.T @ misfit - prior @ (theta - start)
        theta = theta + np.linalg.solve(prior + rows.T @ rows, gradient)
    return theta


def test_depths_of_sn_1987a_come_back_from_a_year_of_their_own_radii(sn1987a_campaign: Campaign) -> None:
    """Radii of sheets at 406 and 1110 light years (fits to ESO 8802, IAUC 4567 and 4733), D = 50 kpc, by the physics
    room; prior depths 10 % wrong. What radii fix, depth/distance^2, must come back; tolerance four standard errors."""
    from planner.campaign.laws import Lognormal

    target = sn1987a_campaign.targets[0]
    features = []
    for ring, light_years in zip(target.features, (406.0, 1110.0), strict=True):
        wrong = Lognormal(median_value=1.1 * light_years * LY_PC, sigma_fraction=0.2)
        features.append(ring.model_copy(update={"dust": ring.dust.model_copy(update={"depth_pc": wrong})}))
    model = build_model(sn1987a_campaign, target.model_copy(update={"features": tuple(features)}), {})
    delay = YEAR - mjd_of_date("1987-05-20")
    rng = np.random.default_rng(1987)
    truth = [np.asarray(echo.sheet_ring(delay, ly * LY_PC, 5e4).radius_arcsec) for ly in (406.0, 1110.0)]
    radii = np.concatenate([np.repeat(t[:, None], 8, axis=1) for t in truth], axis=1)
    found = _fit(model, radii + rng.normal(0.0, RADIUS_ARCSEC, radii.shape), YEAR)
    rows = model.derivatives(found[None], YEAR) / RADIUS_ARCSEC
    precision = gathered(np.linalg.inv(model.belief_covariance), rows, np.ones(len(YEAR)))
    for ring, light_years in zip(model.features, (406.0, 1110.0), strict=True):
        what = wanted(model, ring, LearnGoal.model_validate({"learn": "depth_over_distance2", "to": "1 %"}))
        sigma = 1.0 / np.sqrt(information(precision, what.gradient(model, found[None]))[0])
        error = what.value(model, found[None])[0] - np.log(light_years * LY_PC / 5e4**2)
        assert sigma < 0.03
        assert abs(error) < 4.0 * sigma, (light_years, error, sigma)


# ------------------------------------------------------------------ the known degeneracy

DEEP = "distance_pc: {lognormal: {median: 50000, sigma_fraction: 0.1}}\n"
EXACT = """\
nuisances: {plate_scale_sigma: 1.0e-9, centre_sigma_arcsec: 1.0e-9}
"""


def _deep_sheet(*, exact: bool, goals: str = "[]") -> str:
    tilt = "tilt: {slope_sigma: 1.0e-9}, drift: 0" if exact else "tilt: {slope_sigma: 0.3}"
    dust = f"{{shape: sheet, depth_pc: {{lognormal: {{median: 340, sigma_fraction: 0.3}}}}, {tilt}}}"
    peak = f"{{date: 2024-03-01, sigma_days: {0 if exact else 3}}}"
    outburst = f"outburst: {{peak: {peak}, lasting_days: 40, peak_mag: {{V: 4}}}}\n"
    ring = f"  - ring: Echo\n    dust: {dust}\n    {SEEN}\n    goals: {goals}\n"
    return HEAD + outburst + DEEP + (EXACT if exact else "") + "features:\n" + ring


def _errors_after(model: TargetModel, names: list[str]) -> dict[str, float]:
    mjd = mjd_of_date("2027-02-01") + np.linspace(0.0, 179.0, 24)
    theta = _mean(model)
    rows = model.derivatives(theta, mjd, "hill/plain") / RADIUS_ARCSEC
    rows = rows[:, :, :1]  # one radius an epoch
    precision = gathered(np.linalg.inv(model.belief_covariance), rows, np.ones(24))
    found = {}
    for name in names:
        goal = LearnGoal.model_validate({"learn": name, "to": "1 %"})
        gradient = wanted(model, model.features[0], goal).gradient(model, theta)
        found[name] = float(1.0 / np.sqrt(information(precision, gradient)[0]))
    return found


def test_exact_radii_fix_depth_over_distance_squared_and_leave_depth_and_distance_tied(tmp_path: Path) -> None:
    """24 radii of 0.05 arcsec and no nuisance. rho^2 D^-2 = 2 z ct/D^2 + (ct)^2/D^2: the first term is 800 times the
    second, so the prior alone splits depth from distance: along the tie, z = k D^2, both priors together give
    sd(ln D) = (0.1^-2 + 4 x 0.3^-2)^(-1/2), and sd(ln z) twice that."""
    found = _errors_after(
        model_in(tmp_path, _deep_sheet(exact=True)), ["depth_over_distance2", "depth_pc", "distance_pc"]
    )
    assert found["depth_over_distance2"] < 0.01
    along = (0.1**-2 + 4 * 0.3**-2) ** -0.5
    assert found["distance_pc"] == pytest.approx(along, rel=0.01)
    assert found["depth_pc"] == pytest.approx(2 * along, rel=0.01)


def test_with_nuisances_the_same_radii_are_worth_less(tmp_path: Path) -> None:
    exact = _errors_after(model_in(tmp_path / "a", _deep_sheet(exact=True)), ["depth_over_distance2"])
    real = _errors_after(model_in(tmp_path / "b", _deep_sheet(exact=False)), ["depth_over_distance2"])
    assert real["depth_over_distance2"] > 2.0 * exact["depth_over_distance2"]


def _reach(campaign: Campaign) -> list[str]:
    """What is said of each goal when every slot of the season is taken."""
    ready = flow.prepare(campaign)
    windows = flow._windows(campaign, ready, silent)
    book = flow._book(campaign, ready, windows, silent)
    model = ready.models[campaign.targets[0].name]
    (part,) = book.problem.targets
    reach = season_reach(campaign, model, book, part, windows)
    said = []
    for g, (feature, goal) in enumerate(book.goals[model.target.name]):
        scale = 100.0 if goal.to.unit == "%" else 1.0
        said.append(unreachable(goal, feature, float(reach.typical[g]) * scale, float(reach.share[g])))
    return said


def test_the_reach_of_a_season_says_that_radii_leave_depth_and_distance_tied(tmp_path: Path) -> None:
    goals = "[{learn: depth_over_distance2, to: 8 %}, {learn: distance_pc, to: 2 %}, {learn: depth_pc, to: 3 %}]"
    together, distance, depth = _reach(campaign_in(tmp_path, _deep_sheet(exact=False, goals=goals)))
    assert together == ""
    for text, wanted_text in ((distance, "2 %"), (depth, "3 %")):
        assert text.startswith(
            f"nothing you can schedule reaches {wanted_text}: every slot of the season together gives"
        )
        assert "ring radii leave depth and distance tied: ask for depth_over_distance2" in text


# ------------------------------------------------------------------ every shape to a plan

GOALS = {
    "sheet": "depth_over_distance2, to: 0.5 %", "shell": "shell_radius_pc, to: 1 %",
    "screen": "dust_distance_pc, to: 1 %", "infinity": "dust_distance_pc, to: 1 %", "filled": "distance_pc, to: 1 %",
}  # fmt: skip
SAID = {
    "shell": "look around the day it stands still",
    "screen": "ring radii give 1/dust distance - 1/source distance only",
    "filled": "the angle of highest polarisation is known to a few degrees only",
}  # fmt: skip


@pytest.mark.parametrize("shape", list(SAID))
def test_each_shape_says_what_stands_between_it_and_its_goal(tmp_path: Path, shape: str) -> None:
    (said,) = _reach(campaign_in(tmp_path, ring_text(shape, more=f"goals: [{{learn: {GOALS[shape]}}}]")))
    assert SAID[shape] in said


@pytest.mark.parametrize("shape", ["screen", "filled", "arclet"])
def test_a_plan_for_a_shape_passes_its_recount_and_never_beats_its_bound(tmp_path: Path, shape: str) -> None:
    text = arclet_text() if shape == "arclet" else ring_text(shape, more=f"goals: [{{learn: {GOALS[shape]}}}]")
    campaign = campaign_in(tmp_path, text, CAMPAIGN.replace("2027-06-20", "2027-03-20"))
    plan = flow.plan(campaign, seconds=30)
    assert plan.looks
    assert plan.value <= plan.best_possible * (1 + 1e-9)
    if shape == "filled":
        assert {look.slot.setup for look in plan.looks} == {"hill/polar"}
    understood = flow.understood(campaign)
    assert len(understood.answers) >= 1


def test_all_shapes_share_one_target_and_one_look(tmp_path: Path) -> None:
    rings = "".join(
        f"  - ring: Echo {shape}\n    dust: {DUST[shape]}\n    {SEEN}\n" for shape in ("sheet", "shell", "screen")
    )
    text = ring_text("sheet").split("features:\n")[0] + "features:\n" + rings
    model = model_in(tmp_path, text)
    assert [f.shape.kind for f in model.features if isinstance(f, RingModel)] == ["sheet", "shell", "screen"]
    theta = model.belief(8, 1, "test").draws
    mjd = mjd_of_date("2027-02-01") + np.array([1.0, 100.0])
    assert model.observe(theta, mjd, "hill/plain").shape == (8, 2, 24)
    names = [name for block in model.blocks for name in block.names]
    assert len(names) == len(set(names))
