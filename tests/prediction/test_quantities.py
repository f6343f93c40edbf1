"""Quantities that goals ask for, and their gradients."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
import pytest

from planner.campaign.quantities import QUANTITIES as NAMES
from planner.campaign.records import LearnGoal
from planner.prediction.jet_quantities import astropy_cosmology
from planner.prediction.model import TargetModel
from planner.prediction.quantities import QUANTITIES, wanted
from planner.units import C_AU_PER_DAY


def _goal(learn: str, to: str) -> LearnGoal:
    return LearnGoal.model_validate({"learn": learn, "to": to})


def test_every_quantity_that_can_be_read_can_be_computed() -> None:
    asked = {(kind, name) for name, q in NAMES.items() for kind in q.features}
    assert asked == set(QUANTITIES)


def test_percent_of_depth_over_distance2_is_one_in_log_depth_and_minus_two_in_log_distance(
    models: Mapping[str, TargetModel],
) -> None:
    model = models["Sallow"]
    what = wanted(model, model.features[0], _goal("depth_over_distance2", "2 %"))
    gradient = what.gradient(model, model.belief(4, 1, "test").draws)
    names = [n for b in model.blocks for n in b.names]
    expected = np.zeros(model.size)
    expected[names.index("ln distance_pc")] = -2.0
    expected[names.index("ln Sallow outer ring/depth_pc")] = 1.0
    assert what.sigma == pytest.approx(0.02)
    assert gradient == pytest.approx(np.tile(expected, (4, 1)), abs=1e-9)


def test_apparent_speed_uses_the_transverse_comoving_distance(models: Mapping[str, TargetModel]) -> None:
    """(1 + z) D_A mu / c; astropy's own distance beside ours."""
    model = models["Tern"]
    knot = model.features[0]
    theta = model.belief(8, 1, "test").draws
    speed = QUANTITIES[("knot", "speed_mas_yr")](model, knot, theta)
    cosmology = astropy_cosmology(model.target.cosmology)
    d_m_kpc = cosmology.comoving_transverse_distance(0.412).to_value("kpc")  # type: ignore[attr-defined]
    expected = speed / 365.25 * d_m_kpc / C_AU_PER_DAY  # 1 mas x 1 kpc = 1 au
    assert QUANTITIES[("knot", "apparent_speed_c")](model, knot, theta) == pytest.approx(expected, rel=1e-9)


def test_beta_cos_needs_no_distance(models: Mapping[str, TargetModel]) -> None:
    model = models["Vetch"]
    what = wanted(model, model.features[0], _goal("beta_cos", "0.01"))
    theta = np.concatenate([b.moments()[0] for b in model.blocks])[None, :]
    assert what.value(model, theta) == pytest.approx([(18.0 - 9.5) / (18.0 + 9.5)])  # closed form
    names = [n for b in model.blocks for n in b.names]
    gradient = what.gradient(model, theta)[0]
    assert gradient[names.index("ln distance_pc")] == 0.0
    slope = 2 * 18.0 * 9.5 / (18.0 + 9.5) ** 2  # d beta_cos / d ln approaching, closed form
    assert gradient[names.index("ln Vetch jets/approaching_mas_d")] == pytest.approx(slope, rel=1e-7)
    assert gradient[names.index("ln Vetch jets/receding_mas_d")] == pytest.approx(-slope, rel=1e-7)


def test_position_angles_near_the_wrap_stay_in_one_piece(models: Mapping[str, TargetModel]) -> None:
    model = models["Tern"]
    knot = model.features[0]
    values = QUANTITIES[("knot", "pa_deg")](model, knot, model.belief(256, 1, "test").draws)
    assert np.ptp(values) < 60.0
    assert np.median(values) == pytest.approx(-62.0, abs=1.0)
