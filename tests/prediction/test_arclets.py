"""Arclets: their motion against the geometry of light surfaces, and what it leaves tied."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from echo_campaigns import DISTANCE, HEAD, arclet_text, campaign_in, model_in
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.physics import echo
from planner.prediction.arclets import ArcletModel
from planner.prediction.conditions import CameraSky
from planner.prediction.curves import feature_bands, target_forecast, warnings_of
from planner.prediction.first_answer import ties_of
from planner.prediction.information import gathered, information
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel, build_model
from planner.prediction.quantities import QUANTITIES
from planner.units import C_PC_PER_DAY, RAD_ARCSEC, YEAR_DAYS, mjd_of_date

ON = mjd_of_date("2026-09-01") + 0.5
MJD = mjd_of_date("2027-02-01") + np.array([1.0, 60.0, 179.0])


@pytest.fixture(scope="module")
def model(tmp_path_factory: pytest.TempPathFactory) -> TargetModel:
    return model_in(tmp_path_factory.mktemp("arclet"), arclet_text())


def _arclet(model: TargetModel) -> ArcletModel:
    (found,) = model.features
    assert isinstance(found, ArcletModel)
    return found


def _theta(model: TargetModel, **values: float) -> np.ndarray:
    """Prior mean with some numbers of the arclet set."""
    arclet = _arclet(model)
    theta = np.concatenate([block.moments()[0] for block in model.blocks])[None, :]
    for name, value in values.items():
        number = getattr(arclet, name)
        theta[0, number.index] = np.log(value) if number.log else value
    return theta


def test_on_its_reference_date_it_lies_where_it_was_seen(model: TargetModel) -> None:
    arclet, theta = _arclet(model), model.belief(64, 1, "test").draws
    day = np.array([ON])
    assert arclet.radius_arcsec(theta, day) == pytest.approx(arclet.radius.value(theta), rel=1e-12)
    assert arclet.moved_arcsec(theta, day) == pytest.approx(np.zeros((64, 1)), abs=1e-8)


@given(
    radius=st.floats(500, 4000), age=st.floats(100, 1500), slope=st.floats(-1.5, 1.5), days=st.floats(30, 4000)
)  # fmt: skip
@settings(max_examples=60, deadline=None)
def test_it_stays_on_its_plane_and_on_the_light_surface(
    model: TargetModel, radius: float, age: float, slope: float, days: float
) -> None:
    """ct = r - z with z = z0 + m (rho - rho0): put the radius back into both."""
    arclet = _arclet(model)
    theta = _theta(model, radius=radius, age=age, slope=slope)
    rho = float(arclet.radius_arcsec(theta, np.array([ON + days]))[0, 0]) * 8000.0 / RAD_ARCSEC
    if np.isnan(rho):
        return
    rho0, ct0 = radius * 8000.0 / RAD_ARCSEC, C_PC_PER_DAY * YEAR_DAYS * age
    z = (rho0**2 - ct0**2) / (2 * ct0) + slope * (rho - rho0)
    ct = ct0 + C_PC_PER_DAY * days
    # a light path of hundreds of pc less its depth: twelve digits of the larger are kept
    assert np.hypot(rho, z) - z == pytest.approx(ct, abs=1e-9 * (abs(z) + rho + ct))


def test_an_untilted_arclet_moves_as_the_ring_of_a_sheet(model: TargetModel) -> None:
    arclet, theta = _arclet(model), _theta(model, slope=0.0)
    delay = YEAR_DAYS * 150.0 + (MJD - ON)
    depth = float(echo.depth_from_radius_pc(2400.0, YEAR_DAYS * 150.0, 8000.0))
    expected = echo.sheet_ring(delay, depth, 8000.0).radius_arcsec
    assert arclet.radius_arcsec(theta, MJD)[0] == pytest.approx(np.asarray(expected), rel=1e-10)


@pytest.mark.parametrize("slope", [-0.8, 0.0, 0.5])
def test_its_speed_is_the_local_one_of_inclined_dust(model: TargetModel, slope: float) -> None:
    """v/c = r/(rho - m ct), checked against the closed form of the physics room."""
    arclet, theta = _arclet(model), _theta(model, slope=slope)
    speed = arclet.motion_arcsec_day(theta, np.array([ON]))[0, 0] * 8000.0 / RAD_ARCSEC / C_PC_PER_DAY
    expected = echo.sheet_local_speed_c(2400.0 * 8000.0 / RAD_ARCSEC, YEAR_DAYS * 150.0, slope)
    assert speed == pytest.approx(float(expected), rel=1e-5)


def test_dust_that_rises_across_turns_the_motion_off_the_radius(model: TargetModel) -> None:
    """The echo of a plane is a circle about (m_r ct, m_t ct); its normal at the arclet, by the circle itself."""
    theta = _theta(model, slope=0.3, slope_across=0.4)
    rho0, ct0 = 2400.0 * 8000.0 / RAD_ARCSEC, C_PC_PER_DAY * YEAR_DAYS * 150.0
    normal = np.arctan2(-0.4 * ct0, rho0 - 0.3 * ct0)
    assert _arclet(model).turn_rad(theta)[0, 0] == pytest.approx(normal, rel=1e-12)
    place = _arclet(model).observe(theta, MJD)[0, -1]
    assert np.arctan2(place[0], place[1]) == pytest.approx(np.radians(40.0) + normal, rel=1e-9)


def test_it_moves_along_the_normal_of_the_echo_as_far_as_the_echo_itself(model: TargetModel) -> None:
    """Circles of the plane at two moments: from the arclet along the normal of the first to the second."""
    slope, across, days = 0.3, 0.4, 200.0
    theta = _theta(model, slope=slope, slope_across=across)
    rho0, ct0 = 2400.0 * 8000.0 / RAD_ARCSEC, C_PC_PER_DAY * YEAR_DAYS * 150.0
    on_axis = (rho0**2 - ct0**2) / (2 * ct0) - slope * rho0
    ct1 = ct0 + C_PC_PER_DAY * days
    centre0, centre1 = np.array([slope, across]) * ct0, np.array([slope, across]) * ct1
    radius1 = np.sqrt(2 * on_axis * ct1 + ct1**2 * (1 + slope**2 + across**2))
    normal = np.array([rho0, 0.0]) - centre0
    normal /= np.hypot(*normal)
    start = np.array([rho0, 0.0]) - centre1
    along = -start @ normal + np.sqrt((start @ normal) ** 2 - start @ start + radius1**2)
    moved = _arclet(model).moved_arcsec(theta, np.array([ON + days]))[0, 0] * 8000.0 / RAD_ARCSEC
    assert moved == pytest.approx(along, rel=5e-3)  # the normal turns while it moves by a five-hundredth of the radius


def test_a_setups_centring_shifts_it_and_no_scale_does(model: TargetModel) -> None:
    arclet, theta = _arclet(model), _theta(model)
    east, north = arclet.centres["hill/plain"]
    theta[0, east], theta[0, north] = 0.1, -0.2
    shift = (arclet.observe(theta, MJD, "hill/plain") - arclet.observe(theta, MJD))[0]
    assert shift == pytest.approx(np.tile([0.1, -0.2], (3, 1)))
    names = [name for block in model.blocks for name in block.names]
    assert not any("plate scale" in name for name in names)


def test_it_needs_no_outburst_but_a_distance(tmp_path: Path) -> None:
    from planner.errors import InputError

    campaign = campaign_in(tmp_path / "a", arclet_text())
    assert campaign.targets[0].outburst is None
    with pytest.raises(InputError, match=r"features\[0\]\.arclet: arclet 'Old light' needs the target's distance_pc"):
        campaign_in(tmp_path / "b", arclet_text().replace(DISTANCE, ""))
    assert HEAD in arclet_text()


def _sky() -> CameraSky:
    one = np.ones(len(MJD))
    return CameraSky(one, 1.2 * one, 21.6 * one, 0.13)


def test_its_place_is_known_better_along_its_motion_than_along_its_length(tmp_path: Path) -> None:
    campaign = campaign_in(tmp_path, arclet_text())
    model = build_model(campaign, campaign.targets[0], {})
    theta = model.belief(32, 1, "test").draws
    setup = campaign.setup("hill/plain")
    errors = look_errors(model, theta, MJD, setup, sky=_sky(), seconds=np.full(3, 3600.0))
    assert errors.measurable.all()
    # 20 arcsec long, 3 wide, in an image of 1: ratio sqrt(401/10)
    assert errors.sigma[..., 1] / errors.sigma[..., 0] == pytest.approx(np.sqrt(401.0 / 10.0))
    covariance = errors.rotation.T @ np.diag(errors.sigma[0, 0] ** 2) @ errors.rotation
    _, vectors = np.linalg.eigh(covariance)
    short = vectors[:, 0]
    assert np.degrees(np.arctan2(short[0], short[1])) % 180.0 == pytest.approx(40.0, abs=1e-6)


def test_age_and_inclination_stay_tied_and_it_is_said_why(model: TargetModel) -> None:
    nights = mjd_of_date("2027-02-01") + np.arange(0.0, 180.0)
    ties = ties_of(model, nights, ["hill/plain"])
    found = [t for t in ties if "age_yr" in t and "slope" in t]
    assert found
    assert "an age from place and motion alone is wrong by what the dust is inclined" in found[0]


def test_the_age_of_untilted_dust_is_wrong_by_the_tilt_that_was_not_allowed_for(model: TargetModel) -> None:
    """Radius and motion of dust tilted by 0.5, read as untilted: the age comes out too short, as the motion is fast."""
    arclet = _arclet(model)
    fast = float(arclet.motion_arcsec_day(_theta(model, slope=0.5), np.array([ON]))[0, 0])
    plain = float(arclet.motion_arcsec_day(_theta(model, slope=0.0), np.array([ON]))[0, 0])
    read = [float(echo.age_from_motion_days(2400.0, rate * YEAR_DAYS, 8000.0)) / YEAR_DAYS for rate in (fast, plain)]
    assert read[1] == pytest.approx(150.0, rel=1e-4)
    assert read[0] < 0.96 * read[1]


def test_good_epochs_teach_the_age_once_the_inclination_is_known(model: TargetModel) -> None:
    theta = _theta(model)
    mjd = mjd_of_date("2027-02-01") + np.arange(0.0, 3650.0, 100.0)
    rows = model.derivatives(theta, mjd, "hill/plain") / 0.05
    arclet = _arclet(model)
    assert arclet.age.index is not None
    age = np.zeros(model.size)
    age[arclet.age.index] = 1.0
    prior = np.linalg.inv(model.belief_covariance)
    free = 1.0 / np.sqrt(information(gathered(prior, rows, np.ones(len(mjd))), age[None])[0])
    known = prior.copy()
    for number in (arclet.slope, arclet.radius, model.distance):
        assert number is not None
        assert number.index is not None
        known[number.index, number.index] *= 1e6
    told = 1.0 / np.sqrt(information(gathered(known, rows, np.ones(len(mjd))), age[None])[0])
    assert told < 0.05 < free < 0.5


def test_quantities_of_an_arclet(model: TargetModel) -> None:
    arclet, theta = _arclet(model), _theta(model, pa=-150.0)
    assert QUANTITIES[("arclet", "age_yr")](model, arclet, theta) == pytest.approx([150.0])
    assert QUANTITIES[("arclet", "distance_pc")](model, arclet, theta) == pytest.approx([8000.0])
    assert QUANTITIES[("arclet", "source_direction_deg")](model, arclet, _theta(model)) == pytest.approx([220.0])


def test_the_forecast_of_an_arclet_is_its_motion(tmp_path: Path) -> None:
    campaign = campaign_in(tmp_path, arclet_text())
    model = build_model(campaign, campaign.targets[0], {})
    belief = model.belief(64, 1, "test")
    made = target_forecast(model, belief, MJD, campaign.setups, {})
    assert [b.observable for b in made.bands] == ["motion since reference", "separation time"]
    assert {m.setup for m in made.measurable} == {"hill/plain", "hill/polar"}
    assert len(feature_bands(model.features[0], belief.draws, MJD)) == 2


def test_a_distant_arclet_in_a_filter_never_seen_is_warned_of(tmp_path: Path) -> None:
    campaign = campaign_in(tmp_path, arclet_text().replace("filter: V", "filter: R"))
    model = build_model(campaign, campaign.targets[0], {})
    text = "\n".join(warnings_of(model, model.belief(64, 1, "test").draws, MJD, campaign.setups))
    assert "Old light: it lies 0.67 deg from its supposed source, for whose position the windows are reckoned" in text
    assert "no colour is known for V: it is taken to be as bright there as in R" in text
