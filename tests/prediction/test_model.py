"""The observation model: parameters to observables, and its derivatives."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from planner.physics import echo
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.model import STEP, TargetModel
from planner.prediction.rings import RingModel, sectors
from planner.units import YEAR_DAYS, mjd_of_date

MJD = mjd_of_date("2027-01-04") + np.array([1.0, 40.0, 101.5, 177.0])
SETUPS = {
    "Sallow": "brack-ridge/wide-camera",
    "Brindle": "cairn-south/imager",
    "Tern": "cairn-array/43ghz",
    "Vetch": "cairn-array/22ghz",
}


@pytest.mark.parametrize("name", list(SETUPS))
def test_derivatives_agree_with_richardson_extrapolation(models: Mapping[str, TargetModel], name: str) -> None:
    """The step is chosen so that truncation stays near 1e-8; two halvings extrapolated are good to about 1e-10."""
    model, setup = models[name], SETUPS[name]
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
        scale = np.nanmax(np.abs(exact)) + 1e-12
        # a few roundings of the observable itself, over the step
        rounding = 4 * np.finfo(float).eps * np.nanmax(np.abs(high)) / (STEP * model.sigma[j])
        assert found[..., j] == pytest.approx(exact, abs=2e-7 * scale + rounding, nan_ok=True), (name, j)


def test_an_untilted_whole_ring_has_the_closed_form_radius_in_every_sector(models: Mapping[str, TargetModel]) -> None:
    model = models["Sallow"]
    ring = model.features[0]
    assert isinstance(ring, RingModel)
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]  # prior mean: no tilt, no offsets
    radii = ring.observe(theta, MJD)[0]
    delay = MJD - mjd_of_date("2021-05-20")
    depth = ring.shape.depth_pc(theta, delay)[0]
    expected = echo.sheet_ring(delay, depth, 6100.0).radius_arcsec
    assert radii.shape == (4, 8)
    assert radii == pytest.approx(np.repeat(np.asarray(expected)[:, None], 8, axis=1), rel=1e-9)


def test_a_nearer_side_moves_the_ring_that_way(models: Mapping[str, TargetModel]) -> None:
    model = models["Sallow"]
    ring = model.features[0]
    assert isinstance(ring, RingModel)
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    assert ring.shape.slope_east.index is not None
    theta[0, ring.shape.slope_east.index] = 0.4
    radii = ring.observe(theta, MJD[:1])[0, 0]
    east, west = radii[np.argmin(np.abs(ring.pa_deg - 90))], radii[np.argmin(np.abs(ring.pa_deg - 270))]
    assert east > west + 1.0


def test_an_arc_has_only_the_sectors_that_shine() -> None:
    pa, size = sectors((200.0, 330.0))
    assert size == pytest.approx(130.0 / 3)
    assert pa == pytest.approx([200 + size / 2, 200 + 1.5 * size, 200 + 2.5 * size])
    pa, size = sectors((340.0, 25.0))  # through north
    assert pa.tolist() == [pytest.approx(2.5)]
    assert len(sectors(None)[0]) == 8


def test_setup_nuisances_scale_and_shift_what_is_recorded(models: Mapping[str, TargetModel]) -> None:
    model = models["Brindle"]
    ring = model.features[0]
    assert isinstance(ring, RingModel)
    setup = "cairn-south/imager"
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    nuisance = ring.setups[setup]
    theta[0, nuisance.scale], theta[0, nuisance.centre_north] = 1e-3, 0.05
    sky, seen = ring.observe(theta, MJD)[0, 0], ring.observe(theta, MJD, setup)[0, 0]
    expected = sky * 1.001 + 0.05 * np.cos(np.radians(ring.pa_deg))  # closed form
    assert seen == pytest.approx(expected, rel=1e-12)


def test_a_knot_without_acceleration_is_ballistic_and_its_speed_is_that_of_the_reference_date(
    models: Mapping[str, TargetModel],
) -> None:
    model = models["Tern"]
    knot = model.feature("Tern K2")
    assert isinstance(knot, KnotModel)
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    position = knot.offset_mas(theta, MJD)[0]
    years = (MJD - mjd_of_date("2026-06-10") - 0.5) / YEAR_DAYS
    assert position == pytest.approx(years[:, None] * theta[0, list(knot.path.velocity)], rel=1e-12)
    assert knot.path.along.index is not None
    theta[0, knot.path.along.index] = 0.15
    h = 0.5
    around = knot.offset_mas(theta, np.array([knot.path.reference_mjd - h, knot.path.reference_mjd + h]))[0]
    velocity = (around[1] - around[0]) / (2 * h / YEAR_DAYS)
    assert velocity == pytest.approx(theta[0, list(knot.path.velocity)], rel=1e-9)


def test_acceleration_across_turns_the_path_from_north_through_east(models: Mapping[str, TargetModel]) -> None:
    model = models["Tern"]
    knot = model.feature("Tern K2")
    assert isinstance(knot, KnotModel)
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    assert knot.path.across.index is not None
    theta[0, knot.path.across.index] = 0.15
    late = np.array([knot.path.reference_mjd + 100.0, knot.path.reference_mjd + 101.0])
    step = np.diff(knot.offset_mas(theta, late)[0], axis=0)[0]
    straight = theta[0, list(knot.path.velocity)]
    turn = np.degrees(np.arctan2(step[0], step[1]) - np.arctan2(straight[0], straight[1]))
    assert turn == pytest.approx(np.degrees(np.arctan(0.15 * 100.5 / YEAR_DAYS)), rel=1e-6)  # closed form, positive


def test_core_wander_is_common_to_all_knots_of_an_epoch_and_new_every_thirty_days(
    models: Mapping[str, TargetModel],
) -> None:
    model = models["Tern"]
    assert model.wander is not None
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    start = mjd_of_date("2027-01-04")
    days = start + np.array([5.0, 25.0, 35.0])
    still = model.observe(theta, days, SETUPS["Tern"])
    theta[0, model.wander.east[0]] = 0.07
    shift = (model.observe(theta, days, SETUPS["Tern"]) - still)[0]
    assert shift[:2] == pytest.approx(np.array([[0.014, 0, 0.014, 0]] * 2))  # 0.07 of a 0.2 mas beam, both knots
    assert shift[2] == pytest.approx(np.zeros(4))


def test_a_pair_moves_in_opposite_directions_from_one_moment(models: Mapping[str, TargetModel]) -> None:
    model = models["Vetch"]
    pair = model.features[0]
    assert isinstance(pair, PairModel)
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    offset = pair.offset_mas(theta, MJD)[0]
    ratio = np.hypot(offset[:, 2], offset[:, 3]) / np.hypot(offset[:, 0], offset[:, 1])
    assert ratio == pytest.approx(9.5 / 18.0)
    assert np.degrees(np.arctan2(offset[0, 0], offset[0, 1])) == pytest.approx(141.0)
    at_ejection = pair.offset_mas(theta, np.array([mjd_of_date("2026-11-26") + 0.5]))
    assert at_ejection == pytest.approx(np.zeros((1, 1, 4)), abs=1e-9)


def test_everything_broadcasts_over_draws_and_moments(models: Mapping[str, TargetModel]) -> None:
    for name, setup in SETUPS.items():
        model = models[name]
        observables = sum(len(f.observables) for f in model.features)
        theta = model.belief(3, 1, "test").draws
        assert model.observe(theta, MJD, setup).shape == (3, 4, observables)
        assert model.observe(theta[0], MJD, setup).shape == (4, observables)
        assert model.observe(theta, MJD[:0], setup).shape == (3, 0, observables)
        assert model.derivatives(theta, MJD, setup).shape == (3, 4, observables, model.size)
