"""Tolerances: one standard deviation, in percent or in a unit that fits the quantity."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from planner.campaign.goals import LearnGoal, LooksGoal
from planner.campaign.quantities import QUANTITIES, UNITS, Tolerance, in_unit_of, read_tolerance


@pytest.mark.parametrize(
    ("text", "value", "unit"),
    [
        ("2 %", 2, "%"),
        ("2%", 2, "%"),
        ("0.5 percent", 0.5, "%"),
        ("45 d", 45, "d"),
        ("45d", 45, "d"),
        ("3e-9 1/pc", 3e-9, "1/pc"),
        (".5 mas/yr", 0.5, "mas/yr"),
        (0.04, 0.04, ""),
        (3, 3, ""),
        ("  7 days ", 7, "days"),
    ],
)
def test_a_tolerance_is_a_number_with_a_unit(text, value, unit):
    assert read_tolerance(text) == Tolerance(value, unit)


@pytest.mark.parametrize("text", ["", "d", "-2 %", "0 d", "1e999 d", "0.0.1 d", "2 ± 1 %", None, True, [2, "%"]])
def test_what_is_no_tolerance_is_refused_with_an_example(text):
    with pytest.raises(ValueError, match=r"write one standard deviation above 0 with its unit, e\.g\. '2 %' or '45 d'"):
        read_tolerance(text)


# Definitions: 1 d = 24 h; Julian year 365.25 d; 1 deg = pi/180 rad; 1 kpc = 1000 pc; light year from units.py.
@pytest.mark.parametrize(
    ("name", "text", "value", "unit"),
    [
        ("core_crossing", "36 hours", 1.5, "d"),
        ("core_crossing", "0.5 yr", 182.625, "d"),
        ("pa_deg", "0.1 rad", 18 / math.pi, "deg"),
        ("tilt_deg", "90 arcmin", 1.5, "deg"),
        ("pa_deg", "2 degrees", 2, "deg"),
        ("depth_pc", "0.02 kpc", 20, "pc"),
        ("largest_distance_kpc", "500 pc", 0.5, "kpc"),
        ("depth_over_distance2", "2e-5 1/kpc", 2e-8, "1/pc"),
        ("speed_mas_yr", "40 uas/yr", 0.04, "mas/yr"),
        ("speed_mas_yr", "0.001 mas/d", 0.36525, "mas/yr"),
        ("approaching_mas_d", "365.25 mas/yr", 1, "mas/d"),
        ("apparent_speed_c", "0.3 c", 0.3, "c"),
        ("slope_east", 0.04, 0.04, ""),
        ("beta", "0.02", 0.02, ""),
        ("distance_pc", "6 %", 6, "%"),
    ],
)
def test_units_that_fit_are_turned_into_the_quantitys_own(name, text, value, unit):
    goal = LearnGoal(learn=name, to=text)
    assert goal.to.unit == unit
    assert goal.to.value == pytest.approx(value, rel=1e-12)


@settings(max_examples=60, deadline=None)
@given(st.sampled_from(sorted(QUANTITIES)), st.floats(1e-6, 1e6), st.data())
def test_every_unit_of_a_quantity_turns_there_and_back(name, value, data):
    quantity = QUANTITIES[name]
    unit = data.draw(st.sampled_from(sorted(UNITS[quantity.unit])))
    own = in_unit_of(Tolerance(value, unit), quantity)
    assert own.unit == quantity.unit
    assert own.value / UNITS[quantity.unit][unit] == pytest.approx(value, rel=1e-12)
    assert in_unit_of(own, quantity) == own


def test_percent_is_refused_exactly_where_a_quantity_may_be_0_or_below():
    refused = set()
    for quantity in QUANTITIES.values():
        if not quantity.positive:
            with pytest.raises(ValidationError, match="may be 0 or below, where percent means nothing"):
                LearnGoal(learn=quantity.name, to="5 %")
            refused.add(quantity.name)
        else:
            assert LearnGoal(learn=quantity.name, to="5 %").to == Tolerance(5, "%")
    angles = {"pa_deg", "tilt_deg", "source_direction_deg"}
    assert refused == {"slope_east", "slope_north", "core_crossing", "ejection", *angles}


@pytest.mark.parametrize(
    ("name", "text", "message"),
    [
        (
            "distance_pc",
            "6 deg",
            r"got unit 'deg' in '6 deg'; distance_pc takes one of: pc, kpc, Mpc, ly, %; e\.g\. '6 pc'",
        ),
        ("distance_pc", "6", r"got no unit in '6'; distance_pc takes one of"),
        ("beta", "0.1 c", r"got unit 'c' in '0\.1 c'; beta takes one of: no unit, %; e\.g\. '0\.1'"),
        ("slope_east", "4 %", r"write one standard deviation in plain numbers, e\.g\. '4'"),
        ("depth", "4 %", r"unknown quantity 'depth'; did you mean 'depth_pc'\?"),
    ],
)
def test_a_unit_that_does_not_fit_is_told_with_those_that_do(name, text, message):
    with pytest.raises(ValidationError, match=message):
        LearnGoal(learn=name, to=text)


def test_every_quantity_has_words_and_a_known_unit():
    for name, quantity in QUANTITIES.items():
        assert quantity.name == name
        assert quantity.words
        assert quantity.unit in UNITS
        assert UNITS[quantity.unit][quantity.unit] == 1.0


def test_a_number_of_looks_is_whole_and_above_0():
    assert LooksGoal(looks=3).looks == 3
    for bad in (0, 2.5):
        with pytest.raises(ValidationError, match=r"greater than 0|valid integer"):
            LooksGoal(looks=bad)
