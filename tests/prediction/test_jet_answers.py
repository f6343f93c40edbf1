"""What ``check`` tells of jets, and the bands of derived quantities."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace

import numpy as np
import pytest
from invented_jets import APPARENT, FAR, INTRINSIC, LINEAR, PRECESSING, STATIONARY, knot, pair

from planner import flow
from planner.campaign.quantities import QUANTITIES as NAMES
from planner.campaign.records import Campaign
from planner.physics import jet, jet_paths
from planner.prediction.derived import derived_of
from planner.prediction.jet_answers import along_mas, jet_answers
from planner.prediction.model import TargetModel
from planner.prediction.quantities import QUANTITIES
from planner.records import Track
from planner.units import YEAR_DAYS, mjd_of_date

Make = Callable[..., TargetModel]
HIGH = "cairn-array/43ghz"


def told(campaign: Campaign, model: TargetModel, tracks: Mapping[str, Track]) -> list[str]:
    """Sentences about one feature with the higher band."""
    found = jet_answers(
        model, model.belief(512, 1, "test").draws, flow.night_middles(campaign), [campaign.setup(HIGH)],
        {(model.target.name, HIGH): tracks[HIGH]},
    )  # fmt: skip
    assert {feature for feature, _ in found} <= {f.name for f in model.features}
    return [text for _, text in found]


def test_the_spacing_of_epochs_is_two_sigma_of_motion_to_half_a_knot_spacing(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    """2 sigma / mu and s / (2 mu): for s = 0.25 mas and 0.3 mas/yr the largest is 152 d (closed form)."""
    early = {**APPARENT, "core_crossing": {"date": "2025-06-10", "sigma_days": 20, "at_ghz": 43}, "speed_mas_yr": 0.3}
    model = jet_model(knot("A", early, neighbours={"spacing_mas": 0.25}))
    theta = model.belief(512, 1, "test").draws[:128]
    sigma = along_mas(model, theta, flow.night_middles(demo_campaign), demo_campaign.setup(HIGH), tracks[HIGH])["A"]
    (text,) = told(demo_campaign, model, tracks)
    least, most = jet_paths.useful_spacing_days(
        sigma, 0.25, np.median(model.features[0].speed_mas_yr(theta)) / YEAR_DAYS
    )  # type: ignore[union-attr]
    assert f"in {least:.0f} d, the least useful spacing" in text
    assert f"beyond {most:.0f} d it can be taken for its neighbour 0.25 mas away" in text
    assert most == pytest.approx(0.25 / 2 / 0.3 * YEAR_DAYS, rel=1e-3)


def test_an_empty_range_of_spacings_is_said_with_the_remedy(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    early = {**APPARENT, "core_crossing": {"date": "2025-06-10", "sigma_days": 20, "at_ghz": 43}}
    (text,) = told(demo_campaign, jet_model(knot("A", early, neighbours={"spacing_mas": 0.01})), tracks)
    assert text.endswith("no spacing is both useful and safe; a finer beam or a higher frequency is needed")


def test_what_is_never_measured_has_no_spacing_and_what_stands_still_none_either(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    late = {**APPARENT, "core_crossing": {"date": "2029-06-10", "sigma_days": 20, "at_ghz": 43}}
    assert told(demo_campaign, jet_model(knot("A", late)), tracks) == [
        f"{HIGH}: not measured, so no spacing of epochs is told"
    ]
    assert told(demo_campaign, jet_model(knot("S", STATIONARY)), tracks) == []


def test_a_knot_that_smears_within_a_look_is_told_with_the_longest_look(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    """1.37 mas/h and a beam of 0.85 mas: half a beam in 0.31 h (MAXI J1803-298, Wood et al. 2021)."""
    motion = {"approaching_mas_d": 1.37 * 24, "receding_mas_d": 9.5}
    model = jet_model(pair("P", motion=motion), **FAR)
    wide = replace(tracks[HIGH], beam_major_mas=0.85, beam_minor_mas=0.85)
    texts = told(demo_campaign, model, {HIGH: wide})
    (smear,) = [text for text in texts if "smears" in text]
    assert smear.startswith(f"{HIGH}: it moves 4.1 mas, 4.8 beams, within a look of 3 h")
    assert "look for less than 0.31 h" in smear
    early = {**APPARENT, "core_crossing": {"date": "2025-06-10", "sigma_days": 20, "at_ghz": 43}}
    assert not any("smears" in text for text in told(demo_campaign, jet_model(knot("A", early)), tracks))


def test_both_angles_of_a_stated_speed_are_shown(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    model = jet_model(knot("A", {**APPARENT, "speed_mas_yr": 0.3, "beta": 0.995}))
    text = told(demo_campaign, model, tracks)[0]
    theta = model.belief(1, 1, "test").draws  # the speed is a fixed number: the same in every draw
    speed = float(QUANTITIES[("knot", "apparent_speed_c")](model, model.features[0], theta)[0])
    small, large = (float(a) for a in jet.angles_deg(0.995, speed))
    assert small < 5 < large
    assert text == (
        f"beta 0.995 shows {speed:.3g} c at an angle of {small:.3g} or of {large:.3g} deg; both stay possible"
    )


def test_draws_that_no_angle_allows_are_counted(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    """gamma beta = 8.6 at 0.9933; a speed of 7.5 c known to 20 % is above it in about one draw of four."""
    text = told(demo_campaign, jet_model(knot("A", {**APPARENT, "beta": 0.9933})), tracks)[0]
    share = float(text.split("(")[1].split(" %")[0])
    assert 10 < share < 40


@pytest.mark.parametrize(
    ("record", "target"),
    [
        (knot("A", APPARENT), {}),
        (knot("L", LINEAR), {}),
        (knot("I", INTRINSIC), {}),
        (knot("N", PRECESSING), FAR),
        (knot("S", STATIONARY), {}),
        (pair("P"), FAR),
    ],
)
def test_every_quantity_of_a_motion_is_derived_and_no_other(jet_model: Make, record: dict, target: dict) -> None:
    model = jet_model(record, **target)
    feature = model.features[0]
    found = derived_of(model, model.belief(256, 1, "test").draws)
    expected = (
        set(feature.record.motion.quantities)  # type: ignore[union-attr]
        if feature.kind == "knot"
        else {name for name, q in NAMES.items() if "pair" in q.features}
    )
    assert {d.quantity for d in found} == expected
    for d in found:
        assert (np.diff(d.quantiles) >= 0).all()
        assert d.unit == ("MJD" if d.quantity in ("core_crossing", "ejection") else NAMES[d.quantity].unit)


def test_derived_bands_are_those_of_the_prior(jet_model: Make) -> None:
    """Closed forms: a lognormal speed, a normal date."""
    found = {
        d.quantity: d
        for d in derived_of(*(lambda m: (m, m.belief(4096, 1, "t").draws))(jet_model(knot("A", APPARENT))))
    }
    assert found["speed_mas_yr"].quantiles[2] == pytest.approx(0.3, rel=0.01)
    assert found["speed_mas_yr"].quantiles[3] == pytest.approx(0.3 * np.exp(0.2 * 0.994458), rel=0.01)
    date = mjd_of_date("2026-06-10") + 0.5
    assert found["core_crossing"].quantiles == pytest.approx(
        date + 20 * np.array([-1.645, -0.994, 0, 0.994, 1.645]), abs=0.5
    )


def test_a_pair_too_far_for_its_rates_has_no_speed_in_some_draws_and_that_share_is_told(jet_model: Make) -> None:
    """Largest distance of 18 and 9.5 mas/d is 13.2 kpc: at 12 +- 2 kpc a good share of draws lies beyond."""
    model = jet_model(pair("P"), distance_pc={"lognormal": {"median": 12000, "sigma_fraction": 0.17}})
    found = {d.quantity: d for d in derived_of(model, model.belief(1024, 1, "test").draws)}
    assert 0.5 < found["beta"].exists < 0.9
    assert found["beta"].exists == found["angle_deg"].exists
    assert found["beta_cos"].exists == 1.0
    assert found["beta"].quantiles[4] <= 1.0
