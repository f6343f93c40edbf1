"""Flux of knots: fading laws, spectrum, boosting, the receding knot of a pair, flux scale of a receiver."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import pytest
from invented_jets import APPARENT, CROSSING, FAR, FLUX, INTRINSIC, KINDS, PRECESSING, knot, pair

from planner.physics import flux
from planner.prediction.knots import KnotModel, PairModel
from planner.prediction.model import TargetModel
from planner.units import mjd_of_date

Make = Callable[..., TargetModel]
MJD = mjd_of_date("2027-01-04") + np.array([1.0, 60.0, 177.0])
STILL = {**APPARENT, "core_crossing": {**CROSSING, "sigma_days": 0}, "acceleration_fraction_yr": 0}


def middle(model: TargetModel) -> np.ndarray:
    return np.concatenate([b.moments()[0] for b in model.blocks])[None, :]


def lit(jet_model: Make, motion: dict[str, Any], ghz: float | None = None, **changes: Any) -> np.ndarray:
    """Flux of one knot at the prior mean, (T,)."""
    record = {**knot("A", motion), "flux": {**FLUX, **changes}}
    if record["flux"].get("rest_mjy"):
        del record["flux"]["mjy"]
    model = jet_model(record)
    (feature,) = model.features
    assert isinstance(feature, KnotModel)
    return feature.spot_states(middle(model), MJD, ghz)[0].flux_mjy[0]


DAYS = MJD - mjd_of_date("2026-10-01") - 0.5
AGE = (MJD - mjd_of_date("2026-06-10") - 0.5) / 113.0  # over the 113 days from crossing to the date of the flux


def test_exponential_fading_is_counted_from_the_date_of_the_flux(jet_model: Make) -> None:
    assert lit(jet_model, STILL) == pytest.approx(200 * np.exp(-DAYS / 300), rel=1e-12)


@pytest.mark.parametrize("with_", ["age", "distance"])
def test_a_power_law_falls_with_age_and_alike_with_distance_at_even_speed(jet_model: Make, with_: str) -> None:
    found = lit(jet_model, STILL, fades={"power_law": {"index": 1.3, "with": with_}})
    assert found == pytest.approx(200 * AGE**-1.3, rel=1e-9)


def test_a_thin_adiabatic_blob_fades_as_radius_to_minus_two_p_with_its_own_spectrum(jet_model: Make) -> None:
    """S ~ R^-2p, spectral index (1 - p)/2 (van der Laan 1966): p = 2.5 gives R^-5 and nu^-0.75."""
    fades = {"adiabatic": {"electron_index": 2.5}}
    assert lit(jet_model, STILL, fades=fades) == pytest.approx(200 * AGE**-5, rel=1e-9)
    assert lit(jet_model, STILL, 22.0, fades=fades) == pytest.approx(200 * AGE**-5 * (22 / 43) ** -0.75, rel=1e-9)
    stated = lit(jet_model, STILL, 22.0, fades=fades, spectral_index=-0.5)
    assert stated == pytest.approx(200 * AGE**-5 * (22 / 43) ** -0.5, rel=1e-9)


def test_a_blob_of_known_peak_is_still_rising_where_it_is_opaque(jet_model: Make) -> None:
    fades = {"adiabatic": {"electron_index": 2.5, "peak_ghz": 43}}
    high, low = (lit(jet_model, STILL, ghz, fades=fades) for ghz in (43.0, 1.4))
    assert high[0] > high[1] > high[2]
    assert low[0] < low[1]  # opaque: grows with its surface
    at = flux.adiabatic_mjy(200.0, 1.0, AGE, 2.5)  # 200 mJy is the peak itself here
    assert high == pytest.approx(np.asarray(at), rel=1e-9)


def test_the_spectrum_carries_the_flux_to_another_band(jet_model: Make) -> None:
    ratio = lit(jet_model, STILL, 22.0, spectral_index=-0.8) / lit(jet_model, STILL, spectral_index=-0.8)
    assert ratio == pytest.approx(np.full(3, (22 / 43) ** -0.8), rel=1e-12)


@pytest.mark.parametrize("motion", [INTRINSIC, PRECESSING])
def test_a_rest_flux_is_boosted_in_each_draw(jet_model: Make, motion: dict[str, Any]) -> None:
    """S = rest x doppler^(3 - index) for a blob, index -0.7: the exponent is 3.7."""
    record = knot("A", motion)
    record["flux"] = {**{k: v for k, v in FLUX.items() if k != "mjy"}, "rest_mjy": 5}
    model = jet_model(record, **(FAR if motion is PRECESSING else {}))
    (feature,) = model.features
    assert isinstance(feature, KnotModel)
    theta = model.belief(32, 1, "test").draws
    seen = feature.spot_states(theta, MJD)[0].flux_mjy
    rest = 5 * np.exp(feature.light.ln_flux.value(theta)) * np.exp(-DAYS / 300)
    assert seen == pytest.approx(rest * feature.doppler(theta) ** 3.7, rel=1e-9)
    assert np.ptp(seen[:, 0] / rest[:, 0]) > 0.01


def test_the_counter_knot_is_dimmed_as_much_as_its_doppler_factor_says(jet_model: Make) -> None:
    features, target = KINDS["counter-knot"]
    lamps = [{**f, "flux": {**{k: v for k, v in FLUX.items() if k != "mjy"}, "rest_mjy": 5}} for f in features]
    model = jet_model(*lamps, **target)
    one, other = model.features
    assert isinstance(one, KnotModel)
    assert isinstance(other, KnotModel)
    theta = middle(model)
    seen = [f.spot_states(theta, MJD)[0].flux_mjy for f in (one, other)]
    ratio = (one.doppler(theta) / other.doppler(theta)) ** 3.7
    assert seen[0] / seen[1] == pytest.approx(np.broadcast_to(ratio, (1, 3)), rel=1e-9)
    assert ratio[0, 0] > 1e4  # a blazar's counter-jet is not seen


def receding_share(jet_model: Make, **changes: Any) -> tuple[np.ndarray, np.ndarray]:
    """Receding over approaching flux in each draw, and beta cos of each."""
    model = jet_model(pair("P", motion={"acceleration_fraction_yr": 0}, flux=changes), **FAR)
    (feature,) = model.features
    assert isinstance(feature, PairModel)
    theta = model.belief(64, 1, "test").draws
    near, far = feature.spot_states(theta, MJD)
    return far.flux_mjy / near.flux_mjy, feature.beta_cos(theta)


@pytest.mark.parametrize("index", [0.5, 1.3, 2.0])
def test_without_a_stated_ratio_the_receding_knot_follows_from_both_speeds_at_equal_time(
    jet_model: Make, index: float
) -> None:
    """R^(3 - index' - n) with R = (1 + b)/(1 - b): the closed form for a fading as age^-n (physics.flux)."""
    found, b = receding_share(jet_model, fades={"power_law": {"index": index, "with": "age"}}, spectral_index=-0.6)
    expected = 1.0 / np.asarray(flux.ratio_equal_time(b, -0.6, index))
    assert found == pytest.approx(np.broadcast_to(expected, found.shape), rel=1e-9)


def test_an_exponential_fading_is_followed_back_to_the_younger_age_of_the_receding_knot(jet_model: Make) -> None:
    """Boosting R^-3.6, and an age R times younger: exp((1 - 1/R) t / 40 d); closed form."""
    model = jet_model(pair("P", flux={"spectral_index": -0.6}), **FAR)
    (feature,) = model.features
    assert isinstance(feature, PairModel)
    theta = model.belief(64, 1, "test").draws
    near, far = feature.spot_states(theta, MJD)
    b = feature.beta_cos(theta)
    young = (1 + b) / (1 - b)
    age = MJD - feature.ejection_mjd(theta)
    expected = young**-3.6 * np.exp(age * (1 - 1 / young) / 40)
    assert far.flux_mjy / near.flux_mjy == pytest.approx(expected, rel=1e-9)


def test_a_stated_ratio_is_taken_as_it_stands(jet_model: Make) -> None:
    found, _ = receding_share(jet_model, receding_ratio=0.3)
    assert found == pytest.approx(np.full((64, 3), 0.3), rel=1e-12)


def test_each_receiver_has_a_flux_scale_of_its_own(jet_model: Make) -> None:
    model = jet_model(knot("A", STILL))
    feature = model.features[0]
    assert isinstance(feature, KnotModel)
    theta = middle(model)
    name = "cairn-array/43ghz"
    before = feature.spot_states(theta, MJD, 43.1, name)[0].flux_mjy
    other = feature.spot_states(theta, MJD, 22.2, "cairn-array/22ghz")[0].flux_mjy
    theta[0, feature.core.flux_scale[name]] = 0.07
    assert feature.spot_states(theta, MJD, 43.1, name)[0].flux_mjy == pytest.approx(before * np.exp(0.07), rel=1e-12)
    assert np.array_equal(feature.spot_states(theta, MJD, 22.2, "cairn-array/22ghz")[0].flux_mjy, other)
    assert model.sigma[feature.core.flux_scale[name]] == pytest.approx(0.07, rel=1e-3)
