"""Prior laws: quantiles rise, stay inside the support, and keep their meaning when the law is widened."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from planner.campaign.base import Record
from planner.campaign.laws import AnyLaw, Fixed, Law, Lognormal, Normal, PositiveLaw, TruncatedNormal, Uniform, read_law

quick = settings(max_examples=60, deadline=None)
middle = st.floats(-1e4, 1e4)
width = st.floats(1e-3, 1e3)
positive = st.floats(1e-3, 1e5)


@st.composite
def laws(draw: st.DrawFn) -> Law:
    kind = draw(st.sampled_from(["fixed", "normal", "lognormal", "uniform", "truncated"]))
    if kind == "fixed":
        return Fixed(value=draw(middle))
    if kind == "normal":
        return Normal(mean=draw(middle), sigma=draw(width))
    if kind == "lognormal":
        return Lognormal(median_value=draw(positive), sigma_fraction=draw(st.floats(0.01, 1.5)))
    if kind == "uniform":
        low = draw(middle)
        return Uniform(low=low, high=low + draw(width))
    mean, sigma = draw(middle), draw(width)
    below, above = draw(st.floats(-2, 2)), draw(st.floats(0.1, 3))
    return TruncatedNormal(mean=mean, sigma=sigma, low=mean + below * sigma, high=mean + (below + above) * sigma)


shares = st.lists(st.floats(1e-6, 1 - 1e-6), min_size=2, max_size=8)


@quick
@given(laws(), shares)
def test_quantiles_rise_with_the_share_and_stay_inside_the_support(law, some):
    low, high = law.support
    value = law.quantile(np.sort(some))
    assert value.shape == (len(some),)
    slack = 1e-12 * max(1.0, float(np.abs(value).max()))  # rounding of sums of unlike size
    assert np.all(np.diff(value) >= -slack)
    assert np.all((value >= low - slack) & (value <= high + slack))


@quick
@given(laws())
def test_the_median_is_the_quantile_of_one_half_and_lies_inside_the_support(law):
    assert law.median() == float(law.quantile(0.5))
    assert law.support[0] <= law.median() <= law.support[1]


@quick
@given(st.one_of(st.builds(Normal, mean=middle, sigma=width),
                 st.builds(lambda m, s: Lognormal(median_value=m, sigma_fraction=s), positive, st.floats(0.01, 1.5))),
       st.floats(0.1, 20))  # fmt: skip
def test_widening_a_normal_or_lognormal_law_keeps_its_median_and_scales_its_width(law, factor):
    wide = law.widened(factor)
    assert type(wide) is type(law)
    assert wide.median() == pytest.approx(law.median(), rel=1e-12, abs=1e-12)
    ln = np.log if isinstance(law, Lognormal) else (lambda x: x)
    shares = np.array([0.16, 0.84])
    # relative rounding of the difference grows with the ratio of middle to width
    before, after = np.diff(ln(law.quantile(shares)))[0], np.diff(ln(wide.quantile(shares)))[0]
    assert after == pytest.approx(factor * before, rel=1e-6, abs=1e-9)


@quick
@given(positive, st.floats(1.01, 50), st.floats(0.5, 10))
def test_widening_a_uniform_law_above_0_keeps_it_above_0(low, ratio, factor):
    law = Uniform(low=low, high=low * ratio)
    wide = law.widened(factor)
    assert wide.positive
    assert math.log(wide.support[1] / wide.support[0]) == pytest.approx(factor * math.log(ratio), rel=1e-9)


@pytest.mark.parametrize("shape", [(), (3,), (2, 3), (0,)])
@pytest.mark.parametrize(
    "law",
    [Fixed(value=2), Normal(mean=0, sigma=1), Lognormal(median_value=2, sigma_fraction=0.2), Uniform(low=0, high=1),
     TruncatedNormal(mean=0, sigma=1, low=0)],
    ids=lambda law: law.name,
)  # fmt: skip
def test_quantiles_have_the_shape_of_the_shares(law, shape):
    assert np.shape(law.quantile(np.full(shape, 0.3))) == shape


def test_quantiles_agree_with_another_library():
    """scipy.stats is a separate implementation; 1e-9 relative is far above double rounding."""
    from scipy import stats

    share = np.linspace(0.001, 0.999, 41)
    cases = [
        (Normal(mean=3, sigma=0.5), stats.norm(3, 0.5)),
        (Lognormal(median_value=24, sigma_fraction=0.25), stats.lognorm(0.25, scale=24)),
        (Uniform(low=-1, high=4), stats.uniform(-1, 5)),
        (TruncatedNormal(mean=1, sigma=2, low=0, high=5), stats.truncnorm(-0.5, 2.0, loc=1, scale=2)),
    ]
    for law, other in cases:
        np.testing.assert_allclose(law.quantile(share), other.ppf(share), rtol=1e-9, atol=1e-12)


def test_which_laws_are_positive():
    assert read_law(3).positive
    assert not read_law(0).positive
    assert read_law({"lognormal": {"median": 3, "sigma_fraction": 0.5}}).positive
    assert not read_law({"normal": {"mean": 100, "sigma": 1}}).positive
    assert read_law({"uniform": {"low": 0.1, "high": 1}}).positive
    assert not read_law({"uniform": {"low": 0, "high": 1}}).positive
    assert read_law({"truncated_normal": {"mean": 1, "sigma": 1, "low": 0.01}}).positive
    assert not read_law({"truncated_normal": {"mean": 1, "sigma": 1}}).positive


def test_a_law_is_read_from_a_number_or_from_one_key():
    assert read_law(3) == Fixed(value=3.0)
    assert read_law({"fixed": 3}) == Fixed(value=3.0)
    law = read_law({"lognormal": {"median": 24, "sigma_fraction": 0.25}})
    assert law.median() == pytest.approx(24.0, rel=1e-15)
    assert law.words() == "24 ± 25 % (lognormal)"
    assert read_law(law) is law


class Holder(Record):
    """A record with two laws."""

    any: AnyLaw = Fixed(value=1)
    above: PositiveLaw = Fixed(value=1)


@pytest.mark.parametrize(
    ("data", "keys", "message"),
    [
        ({"any": None}, ("any",), "got nothing; give a number, or one law of: fixed, normal"),
        ({"any": "24"}, ("any",), "got '24'; give a number"),
        ({"any": True}, ("any",), "got True; give a number"),
        ({"any": {"normal": {"mean": 1, "sigma": 1}, "fixed": 1}}, ("any",), "give a number, or one law"),
        ({"any": {"normal": [1, 2]}}, ("any", "normal"), r"got \[1, 2\], needs a mapping of: mean, sigma"),
        ({"any": {"normal": {"mean": 1, "sigma": 0}}}, ("any", "normal", "sigma"), "greater than 0"),
        ({"any": {"normal": {"mean": 1}}}, ("any", "normal", "sigma"), "required"),
        ({"any": {"lognormal": {"median": 0, "sigma_fraction": 1}}}, ("any", "lognormal", "median"), "greater than 0"),
        ({"any": {"lognormal": {"median_value": 1, "sigma_fraction": 1}}}, ("any", "lognormal", "median_value"),
         "unknown key 'median_value'; did you mean 'median'"),
        ({"any": {"uniform": {"low": 2, "high": 2}}}, ("any", "uniform"), "low 2 must be below high 2"),
        ({"any": {"truncated_normal": {"mean": 0, "sigma": 1, "low": 50}}}, ("any", "truncated_normal"),
         "the limits leave nothing of the law"),
        ({"above": 0}, ("above",), "got 0, needs a value above 0"),
        ({"above": {"uniform": {"low": -1, "high": 1}}}, ("above",),
         "got a law that reaches -1, needs a value above 0"),
    ],
)  # fmt: skip
def test_a_bad_law_is_told_with_the_keys_it_stands_at(data, keys, message):
    with pytest.raises(ValidationError, match=message) as caught:
        Holder.model_validate(data)
    assert caught.value.errors()[0]["loc"] == keys


def test_laws_cannot_be_changed():
    law = Normal(mean=1, sigma=1)
    with pytest.raises(ValidationError, match="frozen"):
        law.mean = 2
