"""Time between epochs: enough to see motion, short enough to know the knot again, and what the Sun takes."""

from __future__ import annotations

import re
from collections.abc import Mapping

import numpy as np
import pytest

from planner import flow
from planner.campaign.records import Campaign, Target
from planner.prediction.curves import reference_sky
from planner.prediction.jet_answers import safe_gap_days
from planner.prediction.look import look_errors
from planner.prediction.model import TargetModel
from planner.prediction.spacings import K_ERRORS, longest_near_sun, ring_gaps, sun_gaps
from planner.units import mjd_of_date


def test_a_ring_gap_is_five_errors_of_one_look_over_its_motion(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    """Against a plain loop over draws: error of the mean radius of independent sectors, motion from two nights."""
    model = models["Brindle"]
    theta = model.belief(32, 4, "test").draws
    nights = flow.night_middles(demo_campaign)
    setup = demo_campaign.setup("cairn-south/imager")
    ((name, text),) = ring_gaps(model, theta, nights, [setup])
    assert name == "Brindle ring"
    middle = nights[[len(nights) // 2]]
    assert setup.camera is not None
    errors = look_errors(
        model, theta, middle, setup, sky=reference_sky(model.target, setup, 1),
        seconds=np.array([setup.camera.longest_look_min * 60.0]),
    )  # fmt: skip
    gaps = []
    for b in range(len(theta)):
        if errors.measurable[b, 0, 0]:
            sigma = 1.0 / np.sqrt(sum(1.0 / s**2 for s in errors.sigma[b, 0]))
            radii = model.features[0].observe(theta[b], middle + np.array([0.0, 1.0])).mean(axis=-1)
            gaps.append(K_ERRORS * sigma / abs(radii[1] - radii[0]))
    told = float(re.search(r"in ([\d.]+) d", text)[1])  # type: ignore[index]
    assert told == pytest.approx(np.median(gaps), rel=0.06)  # two digits are printed


def test_the_safe_gap_is_half_a_knot_spacing_of_motion(models: Mapping[str, TargetModel]) -> None:
    model = models["Tern"]
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    speed = float(model.features[0].speed_mas_yr(theta)[0])  # type: ignore[union-attr]
    assert safe_gap_days(model.features[0], theta) == pytest.approx(0.25 / 2 / speed * 365.25)  # type: ignore[arg-type]
    assert safe_gap_days(model.features[1], theta) == np.inf  # type: ignore[arg-type]


def _at(target: Target, ra_deg: float, dec_deg: float) -> Target:
    return target.model_copy(
        update={"position": target.position.model_copy(update={"ra_deg": ra_deg, "dec_deg": dec_deg})}
    )


def test_the_sun_stays_near_a_place_on_its_path_for_twice_the_limit_in_degrees(demo_campaign: Campaign) -> None:
    """At the March equinox point: within 30 deg for 2 x 30 / 0.9856 d, 0.9856 deg/d = 360 deg / 365.2422 d (mean).

    Equinox 2027-03-20 20:25 UTC (almanacs, from memory); precession since 2000 puts the ICRS point 0.4 d earlier still.
    """
    target = _at(demo_campaign.target("Tern"), 0.0, 0.0)
    first, days = longest_near_sun(target, 30.0, mjd_of_date("2027-01-01"))
    assert days == pytest.approx(60 / 0.9856, abs=2.0)  # whole days, and the Sun's speed varies by 3 %
    assert first == pytest.approx(mjd_of_date("2027-03-20") + 0.85 - 0.4 - 30 / 0.9856, abs=2.5)
    assert longest_near_sun(_at(target, 0.0, 89.0), 30.0, mjd_of_date("2027-01-01"))[1] == 0


def test_a_knot_that_the_sun_hides_for_longer_than_is_safe_is_named(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    from dataclasses import replace

    model = models["Tern"]
    theta = model.belief(32, 4, "test").draws
    nights = flow.night_middles(demo_campaign)
    setup = demo_campaign.setup("cairn-array/43ghz")
    assert sun_gaps(model, theta, nights, [setup]) == []  # 24 deg north: the Sun passes far enough
    assert setup.receiver is not None
    wide = replace(setup, receiver=setup.receiver.model_copy(update={"sun_no_closer_deg": 90.0}))
    ((name, text),) = sun_gaps(model, theta, nights, [wide])
    assert name == "Tern K2"
    assert re.search(r"the Sun is within 90 deg for 1\d\d d from 2027-\d\d-\d\d, longer than the 1\d\d d", text)
