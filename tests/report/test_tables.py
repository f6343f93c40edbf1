"""Tables from records."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from report_campaign import UNDERSTOOD, Assumed
from report_records import ARRAY, CAMERA, IMAGER, RING, make_forecast, make_goal, make_look, make_plan, make_windows

from planner.records import Account, Derived, State
from planner.report import tables


def column(table: tables.TextTable, name: str) -> list[str]:
    i = table.columns.index(name)
    return [row[i] for row in table.rows]


def test_a_table_refuses_a_row_of_another_length() -> None:
    with pytest.raises(ValueError, match="table 'T': a row has 1 cells, needs 2"):
        tables.TextTable("T", ("a", "b"), (("1",),))


def test_summary_tells_value_bound_and_both_shortfalls() -> None:
    """Shortfalls by hand: 1 - 3.412/3.468 = 1.61 %; 1 - 3.452/3.468 = 0.46 %; hours 3.75 + 2.5 + 12 = 18.25."""
    rows = dict(tables.plan_summary(make_plan()).rows)
    assert rows["shortfall"] == "1.61 %"
    assert rows["proof shortfall"] == "0.46 %"
    assert rows["value realised"] == "2.958"
    assert rows["hours planned"] == "18.2 of 36.0 granted"
    assert rows["outcome"] == "good, not proven best"


def test_accounts_tell_what_is_left() -> None:
    """By hand: 14 - 3.75 = 10.25; 3.75/14 = 26.8 %."""
    table = tables.accounts_table(make_plan(accounts=(Account(CAMERA, "echoes", "dark", 14.0, 3.75),)))
    assert table.rows == ((CAMERA, "echoes", "dark", "14.0", "3.8", "10.2", "27 %"),)


def test_a_goal_is_reached_only_when_its_odds_meet_the_odds_wanted() -> None:
    plan = make_plan(goals=(make_goal(odds=0.79), make_goal(odds=0.80)))
    assert column(tables.goals_table(plan), "reached") == ["no", "yes"]


def test_odds_carry_their_standard_error() -> None:
    assert tables.odds_words(make_goal(odds=0.872, odds_error=0.011)) == "87 ± 1 %"
    assert tables.odds_words(make_goal(odds=0.872, odds_error=0.024)) == "87 ± 2 %"


def test_odds_are_never_shown_as_certain() -> None:
    """All of a thousand simulated seasons is not every season."""
    assert tables.odds_words(make_goal(odds=1.0, odds_error=0.0)) == "> 99 %"
    assert tables.odds_words(make_goal(odds=0.0, odds_error=0.0)) == "< 1 %"
    assert tables.odds_words(make_goal(odds=0.991, odds_error=0.003)) == "99 %"
    assert tables.odds_words(make_goal(odds=0.01, odds_error=0.003)) == "1 %"


def test_a_look_before_midnight_utc_keeps_its_date() -> None:
    look = make_look(1, 3)
    assert tables.utc_words(replace(look, start_mjd=look.start_mjd - 0.125)) == "22:30-23:45"


def test_remarks_name_the_goal_they_belong_to() -> None:
    (remark,) = tables.goal_remarks(make_plan())
    assert remark.startswith("Reed ring, distance_pc to 6 %: nothing you can schedule reaches 6 %")


def test_looks_stand_in_order_of_start_whatever_their_order_in_the_plan() -> None:
    plan = make_plan(looks=(make_look(2, 50), make_look(1, 3), make_look(3, 20)))
    assert column(tables.looks_table(plan), "look") == ["1", "3", "2"]


def test_looks_show_utc_and_leave_out_what_means_nothing_for_an_array() -> None:
    """The invented start is 0.0625 d = 01:30 after the midnight that ends the evening; 75 minutes later is 02:45."""
    table = tables.looks_table(make_plan(looks=(make_look(1, 3, "Heron", ARRAY),)))
    assert column(table, "UTC") == ["+1 01:30-02:45"]
    assert column(table, "air mass") == ["–"]
    assert column(table, "Moon deg") == ["–"]


def test_states_are_shown_as_soon_as_one_look_is_more_than_proposed() -> None:
    assert "state" not in tables.looks_table(make_plan(looks=(make_look(1, 3),))).columns
    looks = (make_look(1, 3), make_look(2, 9, state=State.FIXED))
    assert column(tables.looks_table(make_plan(looks=looks)), "state") == ["proposed", "fixed"]


def test_reasons_list_every_target_without_a_look() -> None:
    assert [row[0] for row in tables.reasons_table(make_plan()).rows] == ["Plover"]
    assert tables.reasons_table(make_plan(reasons={})).note == "every target has a look"


def test_forecast_values_are_medians_with_their_range_at_three_moments() -> None:
    """Invented ring: 24.0 ± 0.9 arcsec on the first night; 119 nights later 24 + 0.030*119 = 27.57 ± 1.376."""
    table = tables.forecast_values(make_forecast())
    assert table.columns[2:] == ("2027-02-01", "2027-04-01", "2027-05-31", "exists")
    assert table.rows[0][1:3] == ("radius, arcsec", "24.0 (23.1 to 24.9)")
    assert table.rows[0][4] == "27.6 (26.2 to 28.9)"
    assert column(table, "exists") == ["100 %", "100 %", "97 %", "97 %"]


def test_an_observable_that_exists_in_no_draw_is_said_not_to_exist() -> None:
    band = make_forecast().targets[0].bands[0]
    empty = replace(band, quantiles=np.full(band.quantiles.shape, np.nan))
    assert tables.band_words(empty, 0) == "does not exist"


def test_measurable_dates_name_the_ends_of_the_season() -> None:
    table = tables.forecast_measurable(make_forecast())
    assert column(table, "measurable from") == [
        "2027-03-03 (02-19 to 03-17)", "start of season", "2027-03-01 (02-11 to 03-23)",
    ]  # fmt: skip
    assert column(table, "until") == ["end of season", "2027-04-25 (04-02 to 05-22)", "end of season"]
    assert column(table, "never") == ["8 %", "2 %", "11 %"]


def test_a_feature_that_no_draw_can_measure_has_no_dates() -> None:
    forecast = make_forecast()
    nothing = replace(
        forecast.targets[0].measurable[0], first_mjd=np.full(3, np.nan), last_mjd=np.full(3, np.nan), never=1.0
    )
    one = replace(forecast, targets=(replace(forecast.targets[0], measurable=(nothing,)),))
    assert tables.forecast_measurable(one).rows[0][2:5] == ("–", "–", "100 %")


def test_warnings_name_their_target_once() -> None:
    forecast = make_forecast()
    target = replace(forecast.targets[0], warnings=("sheet too thick", "Reed ring: not resolved"))
    found = tables.forecast_warnings(replace(forecast, targets=(target,)))
    assert found == ("Reed: sheet too thick", "Reed ring: not resolved")


def test_ledger_sums_over_the_season_keep_the_order_of_limits() -> None:
    """By hand: 4 x 430 h daylight, one shutdown of 44.5 h, 4 x 170 h altitude, 4 x 12.25 h Moon, 4 x 81.5 h left.

    Limits that took nothing have no column.
    """
    table = tables.windows_season(make_windows())
    assert table.columns[2:] == ("daylight and twilight", "shutdown", "altitude", "Moon distance", "left")
    assert table.rows[0] == ("Reed", CAMERA, "1720", "44", "680", "49", "326")


def test_ledger_leaves_out_setups_that_were_never_considered_for_a_target() -> None:
    pairs = [row[:2] for row in tables.windows_season(make_windows()).rows]
    assert pairs == [("Reed", CAMERA), ("Reed", IMAGER), ("Heron", ARRAY)]
    assert [row[0] for row in tables.windows_season(make_windows(), "Heron").rows] == ["Heron"]


def test_months_are_split_into_tables_that_fit_and_none_is_lost() -> None:
    windows = make_windows()
    months = tuple(f"2027-{m:02d}" for m in range(1, 10))
    shape = (2, 3, len(months))
    ledger = replace(
        windows.ledger,
        months=months,
        left_hours=np.ones(shape),
        lost_hours=np.ones((*shape, len(windows.ledger.limits))),
    )
    found = tables.windows_months(replace(windows, ledger=ledger))
    assert [m for table in found for m in table.columns[2:]] == list(months)
    assert max(len(table.columns) for table in found) == 2 + tables.MONTHS_ABREAST


def test_a_target_month_by_month_shows_the_shutdown_in_its_month() -> None:
    camera, _ = tables.windows_limits_by_month(make_windows(), "Reed")
    assert column(camera, "shutdown") == ["0.0", "0.0", "44.5", "0.0"]


def test_assumptions_carry_where_they_come_from() -> None:
    table = tables.assumptions_table(UNDERSTOOD.assumptions)
    assert table.rows[0] == ("dust.thickness_pc 0.5", "thin filament, common practice; no source", RING)
    assert tables.assumptions_table(()).note == "nothing is assumed: the campaign states every value"


def test_the_same_default_stands_once_with_everyone_it_belongs_to() -> None:
    same = [Assumed(owner, f"goals[{i}].odds", 0.8, "why") for owner in ("A", "B") for i in range(2)]
    table = tables.assumptions_table([*same, Assumed("A", "goals[0].odds", 0.9, "why")])
    assert table.rows == (("goals.odds 0.8", "why", "A; B"), ("goals.odds 0.9", "why", "A"))


def test_fields_with_one_reason_and_the_same_owner_share_a_row() -> None:
    found = [Assumed("setup a", "throughput", 0.3, "preset x"), Assumed("setup a", "pixel_arcsec", 0.4, "preset x")]
    assert tables.assumptions_table(found).rows == (("throughput 0.3; pixel_arcsec 0.4", "preset x", "setup a"),)


def test_unlimited_and_unknown_numbers_have_words() -> None:
    plan = make_plan(goals=(make_goal(prior=math.inf, data_share=math.nan),))
    (row,) = tables.goals_table(plan).rows
    assert row[2] == "unlimited"
    assert row[-1] == "–"


def test_derived_quantities_show_dates_as_dates_and_the_share_of_draws_that_have_them():
    speed = Derived("Heron K1", "apparent_speed_c", "c", np.array([5.0, 6.0, 7.5, 9.0, 10.0]))
    crossing = Derived("Heron K1", "core_crossing", "MJD", 61000.5 + np.array([-20.0, -10.0, 0.0, 10.0, 20.0]))
    beta = Derived("Heron K1", "beta", "", np.array([0.90, 0.91, 0.95, 0.97, 0.98]), exists=0.82)
    made = make_forecast()
    heron = replace(made.target("Heron"), derived=(speed, crossing, beta))
    table = tables.forecast_derived(replace(made, targets=(made.target("Reed"), heron)))
    assert table.rows == (
        ("Heron K1", "apparent_speed_c", "7.50", "6.00 to 9.00", "c", "100 %"),
        # MJD 61000 is 2025-11-21 (0h of 2025-01-01 is MJD 60676)
        ("Heron K1", "core_crossing", "2025-11-21", "2025-11-11 to 2025-12-01", "–", "100 %"),
        ("Heron K1", "beta", "0.950", "0.910 to 0.970", "–", "82 %"),
    )
    assert tables.forecast_derived(made).rows == ()
