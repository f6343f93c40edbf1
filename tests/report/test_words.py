"""How numbers, names and sentences are written."""

from __future__ import annotations

import math

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from report_records import MJD, NIGHTS, make_forecast, make_goal, make_plan

from planner.records import Outcome
from planner.report import words


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (26.14, "26.1"), (0.71, "0.710"), (1234.5, "1234"), (9.996, "10.0"), (0.0, "0"), (-3.14159, "-3.14"),
        (1.234e9, "1.23e+09"), (2.5e-7, "2.50e-07"), (math.nan, "–"), (math.inf, "unlimited"),
    ],
)  # fmt: skip
def test_numbers_keep_three_significant_digits(value: float, text: str) -> None:
    """Expected texts are counted by hand; 9.996 rounds into the next decade and must not gain a digit."""
    assert words.number(value) == text


@given(st.floats(min_value=1e-4, max_value=9e6), st.integers(2, 6))
@settings(max_examples=80)
def test_a_written_number_is_within_half_a_unit_of_its_last_digit(value: float, digits: int) -> None:
    """Half a unit of the last of ``digits`` significant digits, relative, is at most 0.5 * 10^(1 - digits)."""
    assert float(words.number(value, digits)) == pytest.approx(value, rel=0.5001 * 10.0 ** (1 - digits))


def test_a_chance_that_is_not_certain_is_never_written_as_certain() -> None:
    """0.2 % must not read 0 %, nor 99.8 % read 100 %."""
    assert words.percent(0.002) == "< 1 %"
    assert words.percent(0.998) == "> 99 %"
    assert words.percent(0.0) == "0 %"
    assert words.percent(1.0) == "100 %"
    assert words.percent(0.0161, 1) == "1.6 %"
    assert words.percent(math.nan) == "–"


def test_names_lose_control_characters_and_line_breaks() -> None:
    """An escape sequence in a name must not reach a terminal, a newline not a table cell."""
    assert words.plain("Reed\n ring\x1b[31m\u202e!") == "Reed ring [31m !"


def test_a_feature_is_led_by_its_target_only_where_its_name_does_not_say_it() -> None:
    assert words.feature_name("Reed", "Reed ring") == "Reed ring"
    assert words.feature_name("Reed", "outer arc") == "Reed: outer arc"


@given(st.text(max_size=80))
@settings(max_examples=80)
def test_file_stems_are_safe_for_every_name_and_never_repeat(name: str) -> None:
    """Only a-z, 0-9 and the hyphen; a taken stem gets a number."""
    stem = words.slug(name)
    assert stem
    assert set(stem) <= set("abcdefghijklmnopqrstuvwxyz0123456789-")
    assert words.slug(name, {stem}) not in {stem}


def test_a_forecast_moment_is_named_by_its_evening() -> None:
    forecast = make_forecast()
    assert words.night_of(forecast, MJD[30]) == NIGHTS[30]
    assert words.night_of(forecast, math.nan) == "–"


def test_shortfall_sentence_names_bound_value_and_distance() -> None:
    """1 - 3.412 / 3.468 = 0.01615 (by hand), so 1.6 %."""
    text = words.shortfall_sentence(make_plan())
    assert "more than 3.468" in text
    assert "worth 3.412, 1.6 % below that bound" in text
    assert "not proven best" in text


def test_each_outcome_has_its_own_sentence() -> None:
    said = {words.shortfall_sentence(make_plan(outcome=outcome)) for outcome in Outcome}
    assert len(said) == len(Outcome)


def test_nothing_to_gain_is_said_instead_of_a_shortfall() -> None:
    text = words.shortfall_sentence(make_plan(value=0.0, best_possible=0.0, proof_value=0.0))
    assert text.startswith("Nothing is left to gain")


def test_realised_value_is_said_as_a_share_of_the_value() -> None:
    """2.958 / 3.412 = 0.867 (by hand)."""
    assert "2.958 of it is expected to come true (87 %)" in words.realised_sentence(make_plan())
    assert words.realised_sentence(make_plan(value=0.0)) == ""


@pytest.mark.parametrize(
    ("odds", "text"),
    [
        ((0.9, 0.9), "8 looks reach all 2 goals with the odds asked for"),
        ((0.9, 0.1), "8 looks reach 1 of 2 goals with the odds asked for"),
        ((0.1, 0.1), "8 looks reach none of the 2 goals with the odds asked for"),
        ((0.9,), "8 looks reach the only goal with the odds asked for"),
        ((0.1,), "8 looks do not reach the only goal with the odds asked for"),
        ((), "8 looks planned; no goal is stated"),
    ],
)
def test_headline_counts_goals_whose_odds_meet_the_odds_wanted(odds: tuple[float, ...], text: str) -> None:
    plan = make_plan(goals=tuple(make_goal(odds=o) for o in odds))
    assert words.headline(plan) == text
