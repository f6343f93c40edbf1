"""Seeing by month and by night, thin cloud, anchors and crowding in the conditions of a look."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.records import Campaign, Months, SetupRef, Site
from planner.prediction.conditions import conditions, fwhm_arcsec, with_seeing
from planner.prediction.curves import reference_sky
from planner.prediction.look import look_errors
from planner.prediction.look_rings import camera_seconds
from planner.prediction.model import TargetModel
from planner.units import mjd_of_date

MONTHS = np.arange(1, 13)
SKY = {"airmass": np.full(12, 1.5), "sky_mag_arcsec2": np.full(12, 21.0)}


def changed(setup: SetupRef, months: Mapping[str, Any] | None = None, **camera_fields: Any) -> SetupRef:
    """A setup with other weather or another camera."""
    site = setup.site
    if months is not None:
        site = site.model_copy(update={"months": Months.model_validate({"clear": [0.5] * 12} | dict(months))})
    assert setup.camera is not None
    return replace(setup, site=site, camera=setup.camera.model_copy(update=camera_fields))


@pytest.fixture
def imager(demo_campaign: Campaign) -> SetupRef:
    return demo_campaign.setup("cairn-south/imager")


def test_twelve_medians_give_each_month_its_own_image(imager: SetupRef) -> None:
    medians = [0.8 + 0.05 * i for i in range(12)]
    sky = conditions(changed(imager, {"seeing_arcsec": medians}), MONTHS, **SKY)
    assert sky.fwhm_arcsec == pytest.approx(np.array(medians) * 1.5**0.6, rel=1e-12)  # Kolmogorov's power of airmass
    one = conditions(changed(imager, {"seeing_arcsec": {"median": 0.9, "sigma_ln": 0.2}}), MONTHS, **SKY)
    assert np.ptp(one.fwhm_arcsec) == 0.0


def test_the_median_of_the_year_is_the_geometric_mean_of_the_months(imager: SetupRef) -> None:
    site = changed(imager, {"seeing_arcsec": [0.5] * 6 + [2.0] * 6}).site
    assert isinstance(site, Site)
    assert fwhm_arcsec(site, np.ones(1)) == pytest.approx(1.0, rel=1e-12)
    assert fwhm_arcsec(site, np.ones(2), np.array([1, 12])) == pytest.approx([0.5, 2.0])


def test_a_forecast_takes_the_seeing_of_each_nights_month(demo_campaign: Campaign, imager: SetupRef) -> None:
    medians = [1.0] * 12
    medians[2] = 2.0  # March
    setup = changed(imager, {"seeing_arcsec": medians})
    nights = np.array([mjd_of_date(day) + 1.0 for day in ("2027-02-28", "2027-03-01", "2027-03-31", "2027-04-01")])
    sky = reference_sky(demo_campaign.target("Brindle"), setup, 4, nights)
    assert sky.fwhm_arcsec / sky.fwhm_arcsec[0] == pytest.approx([1.0, 2.0, 2.0, 1.0])


def test_draws_and_nights_have_the_seeings_of_the_lognormal_law(imager: SetupRef) -> None:
    setup = changed(imager, {"seeing_arcsec": {"median": 1.0, "sigma_ln": 0.3}})
    sky = conditions(setup, MONTHS, **SKY)
    shaken = with_seeing(sky, setup, np.arange(12), 400)
    logs = np.log(shaken.fwhm_arcsec / sky.fwhm_arcsec)
    assert logs.shape == (400, 12)
    assert logs.mean(axis=0) == pytest.approx(np.zeros(12), abs=1e-12)  # symmetric points
    assert logs.std(axis=0) == pytest.approx(np.full(12, 0.3), rel=0.01)  # 400 equally likely points of a normal law
    assert shaken.typical_fwhm_arcsec == pytest.approx(sky.fwhm_arcsec, rel=1e-12)
    # one night says nothing of the next: correlations of 400 shuffled points stay within 5 standard errors
    apart = np.corrcoef(logs.T)[np.triu_indices(12, 1)]
    assert np.abs(apart).max() < 5 / np.sqrt(400)


def test_a_night_has_the_same_seeing_wherever_it_is_asked_for(imager: SetupRef) -> None:
    sky = conditions(imager, MONTHS, **SKY)
    whole = with_seeing(sky, imager, np.arange(12), 16).fwhm_arcsec
    part = with_seeing(sky.at(np.array([7, 2])), imager, np.array([7, 2]), 16).fwhm_arcsec
    assert np.array_equal(whole[:, [7, 2]], part)
    assert with_seeing(sky.at(np.array([], dtype=int)), imager, np.array([], dtype=int), 16).fwhm_arcsec.shape == (
        16,
        0,
    )


def test_in_space_the_image_is_the_setups_own_and_does_not_shake(imager: SetupRef) -> None:
    setup = changed(imager, image_fwhm_arcsec=0.1)
    sky = conditions(setup, MONTHS, np.full(12, np.nan), SKY["sky_mag_arcsec2"])
    assert np.all(sky.fwhm_arcsec == 0.1)
    assert np.all(sky.airmass == 1.0)
    assert with_seeing(sky, setup, MONTHS, 8) is sky


# ------------------------------------------------------------------ the quantile of brightness and seeing together

MJD = mjd_of_date("2027-01-05") + np.arange(1.0, 160.0, 40.0)


def free(setup: SetupRef, sigma_ln: float) -> SetupRef:
    """No floor, no limit of minutes: seconds follow the light alone."""
    return changed(
        setup, {"seeing_arcsec": {"median": 1.2, "sigma_ln": sigma_ln}}, subtraction_floor=0.0,
        shortest_look_min=0.001, longest_look_min=1e6, field_arcmin=60.0,
    )  # fmt: skip


def test_minutes_reach_the_wanted_snr_in_84_of_100_pairs_of_draw_and_seeing(
    imager: SetupRef, models: Mapping[str, TargetModel]
) -> None:
    model, setup = models["Brindle"], free(imager, 0.4)
    assert setup.camera is not None
    sky = reference_sky(model.target, setup, len(MJD), MJD)
    theta = model.belief(2048, 5, "test").draws
    seconds = camera_seconds(model, theta, MJD, setup.camera, with_seeing(sky, setup, np.arange(len(MJD)), 2048))
    # judged with seeings drawn afresh, at random: 84 % within 4 standard errors of 2048 draws
    luck = np.random.default_rng(3).standard_normal((2048, len(MJD)))
    fresh = replace(sky, fwhm_arcsec=sky.fwhm_arcsec * np.exp(0.4 * luck))
    errors = look_errors(model, theta, MJD, setup, sky=fresh, seconds=seconds)
    reached = (errors.snr[..., 0] >= setup.camera.snr_wanted * (1 - 1e-9)).mean(axis=0)
    assert reached == pytest.approx(np.full(len(MJD), 0.84), abs=4 * np.sqrt(0.84 * 0.16 / 2048) + 0.005)


def test_the_spread_of_the_seeing_costs_minutes(imager: SetupRef, models: Mapping[str, TargetModel]) -> None:
    model = models["Brindle"]
    theta = model.belief(512, 5, "test").draws

    def seconds(sigma_ln: float) -> np.ndarray:
        setup = free(imager, sigma_ln)
        assert setup.camera is not None
        sky = reference_sky(model.target, setup, len(MJD), MJD)
        return camera_seconds(model, theta, MJD, setup.camera, with_seeing(sky, setup, np.arange(len(MJD)), 512))

    still, lively = seconds(1e-9), seconds(0.6)
    assert np.all(lively > still)
    setup = free(imager, 1e-9)
    assert setup.camera is not None
    median = camera_seconds(model, theta, MJD, setup.camera, reference_sky(model.target, setup, len(MJD), MJD))
    assert still == pytest.approx(median, rel=1e-6)


# ------------------------------------------------------------------ cloud, anchor, crowding


def test_thin_cloud_takes_its_share_of_the_light_from_setups_that_bear_it(imager: SetupRef) -> None:
    cloudy = {"clear": [0.5] * 12, "thin_cloud": [0.25] * 12, "thin_cloud_mag": 0.6}
    clear = conditions(changed(imager, cloudy), MONTHS, **SKY)
    thin = conditions(changed(imager, cloudy, needs="thin"), MONTHS, **SKY)
    # a third of the nights that serve lose 0.6 mag: 0.2 mag on average, whatever the airmass
    assert (thin.extinction_mag - clear.extinction_mag) * 1.5 == pytest.approx(np.full(12, 0.2), rel=1e-12)
    assert thin.at(np.array([3])).extinction_mag == pytest.approx(thin.extinction_mag[3:4])


@settings(max_examples=20, deadline=None)
@given(st.floats(0.3, 3.0))
def test_the_anchors_factor_counts_in_minutes_and_in_snr(
    demo_campaign: Campaign, models: Mapping[str, TargetModel], factor: float
) -> None:
    """The factor on all light is that of a more or less efficient camera: one with the throughput times the factor."""
    setup, model = free(demo_campaign.setup("cairn-south/imager"), 0.1), models["Brindle"]
    own = setup.camera
    assert own is not None
    theta = model.belief(32, 5, "test").draws
    sky = reference_sky(model.target, setup, len(MJD), MJD)
    other = replace(setup, camera=own.model_copy(update={"throughput": own.throughput * factor}))
    assert other.camera is not None
    scaled = replace(sky, rate_factor=factor)
    seconds = camera_seconds(model, theta, MJD, own, scaled)
    assert seconds == pytest.approx(camera_seconds(model, theta, MJD, other.camera, sky), rel=1e-9)
    got = look_errors(model, theta, MJD, setup, sky=scaled, seconds=seconds).snr
    assert got == pytest.approx(look_errors(model, theta, MJD, other, sky=sky, seconds=seconds).snr, rel=1e-9)


def test_an_anchor_reaches_the_conditions_of_every_look(imager: SetupRef) -> None:
    from planner.campaign.records import Anchor
    from planner.instruments.calibration import rate_factor

    anchor = Anchor.model_validate({"minutes": 20, "snr": 6, "mag_arcsec2": 24, "sky": "dark"})
    setup = changed(imager, anchor=anchor)
    assert conditions(setup, MONTHS, **SKY).rate_factor == rate_factor(setup) != 1.0
    assert conditions(imager, MONTHS, **SKY).rate_factor == 1.0


@pytest.mark.parametrize("where", ["setup", "target"])
def test_a_crowded_field_needs_longer_and_shows_less(
    imager: SetupRef, models: Mapping[str, TargetModel], where: str
) -> None:
    model = models["Brindle"]
    setup, crowded = free(imager, 0.1), free(imager, 0.1)
    worse = model
    if where == "setup":
        crowded = changed(crowded, crowding=6.0)
    else:
        worse = replace(model, target=model.target.model_copy(update={"crowding": 6.0}))
    assert setup.camera is not None
    assert crowded.camera is not None
    theta = model.belief(64, 5, "test").draws
    sky = reference_sky(model.target, setup, len(MJD), MJD)
    plain = camera_seconds(model, theta, MJD, setup.camera, sky)
    longer = camera_seconds(worse, theta, MJD, crowded.camera, sky)
    assert np.all(longer > 2.0 * plain)  # at most 6 times, less where the ring's own light makes noise
    assert np.all(longer <= 6.0 * plain * (1 + 1e-9))
    less = look_errors(worse, theta, MJD, crowded, sky=sky, seconds=plain).snr
    more = look_errors(model, theta, MJD, setup, sky=sky, seconds=plain).snr
    assert np.all(less <= more)
    assert np.median(less / np.maximum(more, 1e-9)) < 0.8


def test_conditions_are_for_cameras_only(demo_campaign: Campaign) -> None:
    with pytest.raises(ValueError, match="cairn-array/43ghz is not a camera"):
        conditions(demo_campaign.setup("cairn-array/43ghz"), MONTHS, **SKY)
