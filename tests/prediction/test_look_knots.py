"""Knots through an array: core shift, wander, blending with the core and with neighbours, growth, scattering."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_jets import APPARENT, CROSSING, FLUX, knot

from planner.campaign.records import Campaign, Scattering
from planner.instruments import interferometer
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.look import LookErrors, look_errors
from planner.prediction.look_knots import scattered_mas
from planner.prediction.model import TargetModel
from planner.records import Track
from planner.units import YEAR_DAYS, mjd_of_date

Make = Callable[..., TargetModel]
HIGH, LOW = "cairn-array/43ghz", "cairn-array/22ghz"
START = mjd_of_date("2026-06-10") + 0.5
STILL = {"core_crossing": {**CROSSING, "sigma_days": 0}, "acceleration_fraction_yr": 0}


def radial(speed: float, pa: float) -> dict[str, Any]:
    return {**STILL, "speed_mas_yr": speed, "pa_deg": pa}


def bright(name: str, motion: dict[str, Any], **more: Any) -> dict[str, Any]:
    flux = {**FLUX, "fades": {"exponential_days": 1e6}, "sigma_fraction": 1e-6, **more.pop("flux", {})}
    return {**knot(name, motion, **more), "flux": flux}


def looked(
    campaign: Campaign, model: TargetModel, tracks: Mapping[str, Track], mjd: np.ndarray, name: str = HIGH
) -> LookErrors:
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    return look_errors(model, theta, mjd, campaign.setup(name), track=tracks[name])


# ------------------------------------------------------------------ the core


def test_another_band_sees_the_knot_from_its_own_core(jet_model: Make) -> None:
    """Along the jet by Omega (1/nu_stated - 1/nu_setup): nearer at a lower frequency, whose core lies farther out."""
    model = jet_model(knot("A", {**APPARENT, "core_crossing": {**CROSSING, "at_ghz": 43.1}}))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    theta = model.belief(16, 1, "test").draws.copy()
    theta[:, np.concatenate([feature.core.wander.east, feature.core.wander.north])] = 0.0
    mjd = np.array([mjd_of_date("2027-02-01")])
    assert feature.observe(theta, mjd, HIGH) == pytest.approx(feature.observe(theta, mjd), abs=1e-15)
    moved = (feature.observe(theta, mjd, LOW) - feature.observe(theta, mjd))[:, 0]
    omega = feature.core.shift.value(theta)[:, 0]
    pa = np.radians(-62.0)
    size = omega * (1 / 43.1 - 1 / 22.2)
    assert moved == pytest.approx(size[:, None] * np.array([np.sin(pa), np.cos(pa)]), rel=1e-9)
    assert np.median(-size) == pytest.approx(1.86 * (1 / 22.2 - 1 / 43.1), rel=0.1)


def test_the_core_crossing_at_another_frequency_is_later_where_its_core_lies_farther_out(jet_model: Make) -> None:
    """Omega 1.863 mas GHz, 15.4 against 43 GHz: 0.0777 mas, 113 days at 0.25 mas/yr (closed form)."""
    from planner.campaign.records import LearnGoal
    from planner.prediction.quantities import wanted

    model = jet_model(knot("A", radial(0.25, -62.0)), nuisances={"core_shift_mas_ghz": 1.863})
    theta = model.belief(4, 1, "test").draws
    goals = [
        LearnGoal.model_validate({"learn": "core_crossing", "to": "20 d", **extra}) for extra in ({}, {"at_ghz": 15.4})
    ]
    here, there = (wanted(model, model.features[0], goal).value(model, theta) for goal in goals)
    assert here == pytest.approx(np.full(4, START), abs=1e-6)
    assert there - here == pytest.approx(np.full(4, 1.863 * (1 / 15.4 - 1 / 43) / 0.25 * YEAR_DAYS), abs=1e-6)
    assert (there - here)[0] == pytest.approx(113.0, abs=0.6)


def test_a_season_in_two_bands_teaches_the_core_shift(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    model = jet_model(bright("A", {**APPARENT, "acceleration_fraction_yr": 0}))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    index = feature.core.shift.index
    assert index is not None
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    mjd = mjd_of_date("2027-03-01") + np.arange(0.0, 100.0, 5.0)
    precision = np.linalg.inv(model.belief_covariance)
    sigma = []
    for names in ([HIGH], [HIGH, LOW]):
        total = precision.copy()
        for name in names:
            rows = looked(demo_campaign, model, tracks, mjd, name).whiten(model.derivatives(theta, mjd, name))
            flat = rows.reshape(-1, model.size)
            total += flat.T @ flat
        sigma.append(np.sqrt(np.linalg.inv(total)[index, index]) / model.sigma[index])
    assert sigma[0] > 0.99  # one band alone says nothing of it
    assert sigma[1] < 0.9


# ------------------------------------------------------------------ blending


def test_a_knot_inside_half_a_beam_of_the_core_is_lost_and_blends_up_to_one_and_a_half(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    model = jet_model(bright("A", radial(0.5, -62.0), grows=0, size_mas=0))
    track = tracks[HIGH]
    cut = float(interferometer.cut_fwhm(track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, -62.0))
    beams = np.array([0.3, 0.499, 0.501, 0.8, 1.0, 1.499, 1.6, 3.0])
    errors = looked(demo_campaign, model, tracks, START + beams * cut / 0.5 * YEAR_DAYS)
    assert errors.measurable[0, :, 0].tolist() == [False, False, *[True] * 6]
    factor = (errors.sigma[0, :, 0] / errors.sigma[0, -1, 0]) ** 2
    assert factor[2:] == pytest.approx(1 / np.minimum(beams[2:] - 0.5, 1.0), rel=1e-3)  # our stated shape


@given(first=st.floats(-170.0, 170.0), gap=st.floats(2.0, 12.0))
@settings(max_examples=15, deadline=None)
def test_neighbours_raise_each_others_variance_and_hide_each_other_inside_half_a_beam(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track], first: float, gap: float
) -> None:
    """Two equal knots with a small angle between them, far from the core: only their own distance counts."""
    pair_of = [bright(n, radial(2.0, pa), grows=0, size_mas=0) for n, pa in (("A", first), ("B", first + gap))]
    mjd = mjd_of_date("2027-02-01") + np.array([0.0, 60.0, 120.0])
    together = looked(demo_campaign, jet_model(*pair_of), tracks, mjd)
    alone = looked(demo_campaign, jet_model(pair_of[0]), tracks, mjd)
    years = (mjd - START) / YEAR_DAYS
    a, b = (2.0 * years[:, None] * [np.sin(np.radians(pa)), np.cos(np.radians(pa))] for pa in (first, first + gap))
    between = a - b
    t = tracks[HIGH]
    cut = interferometer.cut_fwhm(
        t.beam_major_mas, t.beam_minor_mas, t.beam_pa_deg, np.degrees(np.arctan2(between[:, 0], between[:, 1]))
    )
    beams = np.hypot(*between.T) / cut
    hidden = beams <= 0.5
    assert np.array_equal(together.measurable[0, :, 0], ~hidden)
    assert np.array_equal(together.measurable[0, :, 1], ~hidden)
    factor = interferometer.blending_factor(beams[~hidden])
    ratio = (together.sigma[0, ~hidden, 0] / alone.sigma[0, ~hidden, 0]) ** 2
    assert ratio == pytest.approx(np.asarray(factor), rel=1e-6)
    assert np.all(np.isinf(together.sigma[0, hidden, 0]))


def test_a_neighbour_that_has_faded_from_sight_disturbs_no_more(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    other = bright("B", radial(1.0, -60.0), flux={"mjy": 1e-3})
    mjd = mjd_of_date("2027-02-01") + np.array([0.0, 60.0])
    with_it = looked(demo_campaign, jet_model(bright("A", radial(1.0, -62.0)), other), tracks, mjd)
    alone = looked(demo_campaign, jet_model(bright("A", radial(1.0, -62.0))), tracks, mjd)
    assert with_it.sigma[..., :2] == pytest.approx(alone.sigma, rel=1e-12)
    assert any(b.reason == "too faint" and b.mask.any() for b in with_it.blocked if b.feature == "B")


def test_what_hides_a_knot_is_told_by_the_neighbours_name(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    model = jet_model(bright("A", radial(1.0, -62.0)), bright("B", radial(1.0, -64.0)))
    errors = looked(demo_campaign, model, tracks, np.array([mjd_of_date("2027-02-01")]))
    told = {(b.feature, b.reason) for b in errors.blocked if b.mask.any()}
    assert told == {("A", "within half a beam of B"), ("B", "within half a beam of A")}


# ------------------------------------------------------------------ size


def test_a_knot_grows_with_its_separation_and_its_peak_falls(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    track = tracks[HIGH]
    mjd = mjd_of_date("2027-02-01") + np.array([0.0, 100.0])
    apart = 2.0 * (mjd - START) / YEAR_DAYS
    snr = {}
    for grows in (0.0, 0.1):
        errors = looked(demo_campaign, jet_model(bright("A", radial(2.0, -62.0), grows=grows)), tracks, mjd)
        snr[grows] = errors.snr[0, :, 0]
    beam2 = track.beam_major_mas * track.beam_minor_mas
    expected = (1 + 0.05**2 / beam2) / (1 + (0.05 + 0.1 * apart) ** 2 / beam2)  # peak of a Gaussian in a Gaussian beam
    assert snr[0.1] / snr[0.0] == pytest.approx(expected, rel=1e-9)
    assert jet_model(knot("A", APPARENT)).features[0].record.grows == 0.1  # type: ignore[union-attr]


def test_scattering_falls_as_frequency_to_minus_two() -> None:
    """1.9 mas at 8.4 GHz is 134 mas at 1 GHz; 135 mas was measured there (GRS 1915+105, abstract)."""
    assert scattered_mas(Scattering(at_ghz=8.4, mas=1.9), 1.0) == pytest.approx(135.0, rel=0.01)
    assert scattered_mas(None, 1.0) == 0.0


def test_scattering_widens_the_beam_and_the_knot(
    demo_campaign: Campaign, jet_model: Make, tracks: Mapping[str, Track]
) -> None:
    """A blur of a whole beam: half a beam of the core lies sqrt 2 farther out."""
    track = tracks[HIGH]
    cut = float(interferometer.cut_fwhm(track.beam_major_mas, track.beam_minor_mas, track.beam_pa_deg, -62.0))
    record = bright("A", radial(0.5, -62.0), grows=0, size_mas=0)
    blurred = jet_model(record, scatter_mas={"at_ghz": 43.1, "mas": cut})
    clear = jet_model(record)
    beams = np.array([0.6, 0.69, 0.72, 3.0])
    mjd = START + beams * cut / 0.5 * YEAR_DAYS
    found, before = (looked(demo_campaign, m, tracks, mjd) for m in (blurred, clear))
    assert before.measurable[0, :, 0].all()
    assert found.measurable[0, :, 0].tolist() == [False, False, True, True]  # 0.5 sqrt 2 = 0.7071
    beam2 = track.beam_major_mas * track.beam_minor_mas
    assert found.snr[0] / before.snr[0] == pytest.approx(np.full((4, 1), 1 / (1 + cut**2 / beam2)), rel=1e-9)
    assert found.sigma[0, -1, 0] > before.sigma[0, -1, 0]


def test_motion_within_a_look_lowers_the_peak_and_widens_the_knot(
    demo_campaign: Campaign, models: Mapping[str, TargetModel]
) -> None:
    """Drawn out by L, a knot's peak falls by b / hypot(b, L), b the mean beam (closed form); a still one keeps it."""
    model, ref = models["Vetch"], demo_campaign.setup("cairn-array/22ghz")
    theta = model.belief(8, 5, "test").draws
    pair = model.features[0]
    assert isinstance(pair, PairModel)
    mjd = np.array([mjd_of_date("2027-01-05")])
    snr = {}
    for hours in (0.0, 1.0):
        track = Track(6.0, hours, 0.0, 8, 0.6, 0.6, 0.0, 1e-4)
        snr[hours] = look_errors(model, theta, mjd, ref, track=track).snr[:, 0, 0]
    moved = pair.speed_mas_yr(theta) / YEAR_DAYS / 24.0
    assert snr[1.0] == pytest.approx(snr[0.0] * 0.6 / np.hypot(0.6, moved), rel=1e-9)
