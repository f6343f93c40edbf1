"""From records to rows of text: the same tables go to the terminal and to the page."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import Protocol

import numpy as np

from planner.records import Account, Band, Derived, Forecast, GoalResult, Look, Measurable, Plan, State, Windows
from planner.report.series import was_considered
from planner.report.words import (
    NOTHING,
    feature_name,
    hours,
    night_of,
    number,
    percent,
    plain,
    realised_sentence,
    shortfall_sentence,
    with_unit,
)
from planner.units import iso_of_mjd, mjd_of_date


@dataclass(frozen=True, slots=True)
class TextTable:
    """A table of text.

    ``numbers`` holds the columns that are set to the right and never broken; ``whole`` those of text that
    the page does not break either (the terminal may, when it is narrow).
    """

    title: str
    columns: tuple[str, ...]
    rows: tuple[tuple[str, ...], ...]
    numbers: frozenset[int] = frozenset()
    note: str = ""
    whole: frozenset[int] = frozenset()

    def __post_init__(self) -> None:
        for row in self.rows:
            if len(row) != len(self.columns):
                raise ValueError(f"table {self.title!r}: a row has {len(row)} cells, needs {len(self.columns)}")


class AssumedValue(Protocol):
    """A default that the campaign left in place."""

    @property
    def owner(self) -> str:
        """What it belongs to."""

    @property
    def field(self) -> str:
        """The field that was left out."""

    @property
    def value(self) -> object:
        """The default."""

    @property
    def why(self) -> str:
        """Where the default comes from."""


# ------------------------------------------------------------------ the plan


def plan_summary(plan: Plan) -> TextTable:
    """Value, value realised, bound, shortfalls and outcome of a plan."""
    planned = sum(account.planned_hours for account in plan.accounts)
    granted = sum(account.granted_hours for account in plan.accounts)
    rows = (
        ("looks", str(len(plan.looks))),
        ("hours planned", f"{hours(planned)} of {hours(granted)} granted"),
        ("value", number(plan.value, 4)),
        ("value realised", number(plan.value_realised, 4)),
        ("best possible", number(plan.best_possible, 4)),
        ("shortfall", percent(plan.shortfall, 2)),
        ("proof shortfall", percent(plan.proof_shortfall, 2)),
        ("outcome", plan.outcome.value),
    )
    note = " ".join(part for part in (shortfall_sentence(plan), realised_sentence(plan)) if part)
    return TextTable(f"Plan of {plain(plan.campaign)}", ("what", "amount"), rows, frozenset(), note)


def accounts_table(plan: Plan) -> TextTable:
    """Hours granted, planned and left of every allocation."""

    def row(a: Account) -> tuple[str, ...]:
        share = percent(a.planned_hours / a.granted_hours) if a.granted_hours > 0 else NOTHING
        names = (plain(a.setup), plain(a.programme), a.sky)
        return (*names, hours(a.granted_hours), hours(a.planned_hours), hours(a.left_hours), share)

    columns = ("setup", "programme", "sky", "granted h", "planned h", "left h", "used")
    return TextTable("Accounts", columns, tuple(map(row, plan.accounts)), frozenset({3, 4, 5, 6}))


def odds_words(goal: GoalResult) -> str:
    """Odds of a goal with their standard error, e.g. ``86 ± 1 %``; never shown as certain."""
    if goal.odds_error < 0.005:
        return "< 1 %" if goal.odds < 0.005 else "> 99 %" if goal.odds >= 0.995 else percent(goal.odds)
    return f"{100 * goal.odds:.0f} ± {max(1, round(100 * goal.odds_error))} %"


def goals_table(plan: Plan) -> TextTable:
    """Each goal: now, expected with the plan, with every slot of the season, and its simulated odds."""

    def row(g: GoalResult) -> tuple[str, ...]:
        return (
            feature_name(g.target, g.feature),
            plain(g.goal),
            with_unit(g.prior, g.unit),
            with_unit(g.expected, g.unit),
            with_unit(g.everything, g.unit),
            odds_words(g),
            percent(g.odds_wanted),
            "yes" if g.reached else "no",
            percent(g.data_share),
        )

    columns = ("feature", "goal", "now", "expected", "all slots", "odds", "wanted", "reached", "from data")
    note = (
        "now, expected, all slots: one standard deviation (or usable looks) before the season, with this plan, and "
        "with every slot of the season; from data: share of the precision that the data bring, not the prior."
    )
    rows = tuple(map(row, plan.goals))
    return TextTable("Goals", columns, rows, frozenset({2, 3, 4, 5, 6, 8}), note if rows else "no goal is stated")


def goal_remarks(plan: Plan) -> tuple[str, ...]:
    """What is said about goals that nothing can reach."""
    return tuple(
        f"{feature_name(g.target, g.feature)}, {plain(g.goal)}: {plain(g.remark)}" for g in plan.goals if g.remark
    )


def utc_words(look: Look) -> str:
    """Start and end in UTC; led by ``+1`` when the start falls on the date after the night's name."""
    start = iso_of_mjd(look.start_mjd)
    later = int(mjd_of_date(start[:10]) - mjd_of_date(look.slot.night))
    return (f"{later:+d} " if later else "") + f"{start[11:16]}-{iso_of_mjd(look.end_mjd)[11:16]}"


def looks_table(plan: Plan) -> TextTable:
    """One row a look, in order of start; states are shown when any look is more than proposed."""
    stated = any(k.state is not State.PROPOSED for k in plan.looks)

    def row(k: Look) -> tuple[str, ...]:
        s = k.slot
        return (
            str(k.number),
            s.night,
            utc_words(k),
            plain(s.target),
            plain(f"{s.setup}, {s.mode.name}"),
            number(s.airmass, 3),
            number(s.moon_separation_deg, 2 if s.moon_separation_deg < 99.5 else 3),
            number(s.expected_snr, 2 if s.expected_snr < 99.5 else 3),
            percent(s.chance_clear),
            percent(s.chance_measurable),
            *([k.state.value] if stated else []),
        )

    last = ("state",) if stated else ()
    columns = ("look", "night", "UTC", "target", "setup, mode", "air mass", "Moon deg", "S/N", "clear", "meas.", *last)
    rows = tuple(row(k) for k in sorted(plan.looks, key=lambda k: (k.start_mjd, k.number)))
    note = (
        "A night is named by the civil date at its evening, +1 before UTC means the date after it; clear: chance of "
        "weather and equipment; meas.: chance that at least one feature is measurable."
    )
    return TextTable("Looks", columns, rows, frozenset({0, 1, 2, 5, 6, 7, 8, 9}), note if rows else "no look")


def reasons_table(plan: Plan) -> TextTable:
    """Why targets have no look."""
    rows = tuple((plain(target), plain(why)) for target, why in plan.reasons.items())
    return TextTable(
        "Targets without a look", ("target", "why"), rows, frozenset(), "" if rows else "every target has a look"
    )


# ------------------------------------------------------------------ the forecast


def _moments(forecast: Forecast) -> tuple[int, ...]:
    """Nights at start, middle and end of the season (fewer when they coincide)."""
    last = len(forecast.nights) - 1
    return tuple(dict.fromkeys((0, last // 2, last))) if last >= 0 else ()


def band_words(band: Band, night: int) -> str:
    """Median of an observable with its 16-84 % range on one night."""
    low, middle, high = (float(band.quantiles[i, night]) for i in (1, 2, 3))
    if middle != middle:  # nan: the observable exists in no draw
        return "does not exist"
    return f"{number(middle)} ({number(low)} to {number(high)})"


def forecast_values(forecast: Forecast) -> TextTable:
    """Every observable of every feature at start, middle and end of the season."""
    moments = _moments(forecast)
    rows = tuple(
        (
            feature_name(t.target, band.feature),
            plain(f"{band.observable}, {band.unit}" if band.unit else band.observable),
            *(band_words(band, night) for night in moments),
            percent(min((float(band.exists[night]) for night in moments), default=float("nan"))),
        )
        for t in forecast.targets
        for band in t.bands
    )
    columns = ("feature", "observable", *(forecast.nights[night] for night in moments), "exists")
    note = "Quantiles are over the draws in which the observable exists; exists: least share of them on these nights."
    numbers, whole = frozenset({len(columns) - 1}), frozenset(range(2, len(columns) - 1))
    return TextTable("Forecast: median (16 to 84 %)", columns, rows, numbers, note, whole)


def forecast_spacings(forecast: Forecast) -> TextTable:
    """Time between epochs: enough to see motion, and not so long that a knot is taken for another."""
    rows = tuple((feature_name(t.target, f), plain(text)) for t in forecast.targets for f, text in t.spacings)
    return TextTable("Time between epochs", ("feature", "useful and safe"), rows)


def forecast_derived(forecast: Forecast) -> TextTable:
    """What is believed of every quantity that follows from the parameters."""

    def words(d: Derived, i: int) -> str:
        value = float(d.quantiles[i])
        return iso_of_mjd(value)[:10] if d.unit == "MJD" else number(value)

    rows = tuple(
        (
            feature_name(t.target, d.feature),
            plain(d.quantity),
            words(d, 2),
            f"{words(d, 1)} to {words(d, 3)}",
            NOTHING if d.unit in ("", "MJD") else plain(d.unit),
            percent(d.exists),
        )
        for t in forecast.targets
        for d in t.derived
    )
    columns = ("feature", "quantity", "median", "16 to 84 %", "unit", "exists")
    note = "What is believed now; exists: share of draws in which the quantity has a value." if rows else ""
    return TextTable("What follows from the parameters", columns, rows, frozenset({2, 5}), note, frozenset({1, 3}))


def _from_words(forecast: Forecast, m: Measurable, ends: tuple[float, float, float], edge: str) -> str:
    low, middle, high = (night_of(forecast, float(v)) for v in ends)
    if middle == NOTHING:
        return NOTHING
    first, last = forecast.nights[0], forecast.nights[-1]
    if edge == "start" and high == first:
        return "start of season"
    if edge == "end" and low == last:
        return "end of season"
    return middle if low == high else f"{middle} ({low[5:]} to {high[5:]})"


def forecast_measurable(forecast: Forecast) -> TextTable:
    """From when until when each feature can be measured with each setup, and what stands in the way."""
    rows = []
    for t in forecast.targets:
        for m in t.measurable:
            firsts = (float(m.first_mjd[0]), float(m.first_mjd[1]), float(m.first_mjd[2]))
            lasts = (float(m.last_mjd[0]), float(m.last_mjd[1]), float(m.last_mjd[2]))
            rows.append(
                (
                    feature_name(t.target, m.feature),
                    plain(m.setup),
                    _from_words(forecast, m, firsts, "start"),
                    _from_words(forecast, m, lasts, "end"),
                    percent(m.never),
                    plain(m.reason) or NOTHING,
                )
            )
    columns = ("feature", "setup", "measurable from", "until", "never", "what stands in the way")
    note = "Dates are medians over draws (16 to 84 %); never: chance of no measurable night; weather is left out."
    whole = frozenset({1, 2, 3})
    return TextTable("When it can be measured", columns, tuple(rows), frozenset({4}), note if rows else "", whole)


def forecast_warnings(forecast: Forecast) -> tuple[str, ...]:
    """Model assumptions that fail, each with its target (once)."""
    return tuple(plain(w if t.target in w else f"{t.target}: {w}") for t in forecast.targets for w in t.warnings)


# ------------------------------------------------------------------ the windows

MONTHS_ABREAST = 7  # columns of months that fit beside target and setup in 100 characters


def _pairs(windows: Windows, target: str | None) -> Iterable[tuple[int, int]]:
    """Indices of target and setup of which the ledger holds any hour."""
    for i, name in enumerate(windows.ledger.targets):
        for j, setup in enumerate(windows.ledger.setups):
            if (target is None or name == target) and was_considered(windows, name, setup):
                yield i, j


def _telling(windows: Windows, pairs: Iterable[tuple[int, int]]) -> list[int]:
    """Numbers of the limits that took any hour of these pairs."""
    lost = sum((windows.ledger.lost_hours[i, j].sum(axis=0) for i, j in pairs), np.zeros(len(windows.ledger.limits)))
    return [int(k) for k in np.flatnonzero(lost > 0.0)]


def windows_season(windows: Windows, target: str | None = None) -> TextTable:
    """Hours lost to each limit in the order of charging, and hours left, over the season."""
    ledger = windows.ledger
    limits = _telling(windows, _pairs(windows, target))
    rows = tuple(
        (
            plain(ledger.targets[i]),
            plain(ledger.setups[j]),
            *(f"{ledger.lost_hours[i, j, :, k].sum():.0f}" for k in limits),
            f"{ledger.left_hours[i, j].sum():.0f}",
        )
        for i, j in _pairs(windows, target)
    )
    numbers = frozenset(range(2, 3 + len(limits)))
    note = (
        "Hours of the season; an hour is charged to the first limit, from left to right, that forbids it. "
        "Limits that took no hour are left out."
    )
    columns = ("target", "setup", *(ledger.limits[k] for k in limits), "left")
    return TextTable("Where the hours went", columns, rows, numbers, note)


def windows_months(windows: Windows, target: str | None = None) -> tuple[TextTable, ...]:
    """Hours left by month, in tables of at most seven months."""
    ledger = windows.ledger
    tables = []
    for start in range(0, len(ledger.months), MONTHS_ABREAST):
        span = range(start, min(start + MONTHS_ABREAST, len(ledger.months)))
        rows = tuple(
            (
                plain(ledger.targets[i]),
                plain(ledger.setups[j]),
                *(hours(float(ledger.left_hours[i, j, month])) for month in span),
            )
            for i, j in _pairs(windows, target)
        )
        columns = ("target", "setup", *(ledger.months[month] for month in span))
        tables.append(TextTable("Hours left by month", columns, rows, frozenset(range(2, 2 + len(span)))))
    return tuple(tables)


def windows_limits_by_month(windows: Windows, target: str) -> tuple[TextTable, ...]:
    """For one target, a table a setup: hours lost to each limit and left, month by month."""
    ledger = windows.ledger
    i = ledger.targets.index(target)

    def one(j: int) -> TextTable:
        limits = _telling(windows, [(i, j)])
        rows = tuple(
            (
                month,
                *(hours(float(ledger.lost_hours[i, j, m, k])) for k in limits),
                hours(float(ledger.left_hours[i, j, m])),
            )
            for m, month in enumerate(ledger.months)
        )
        title = f"{plain(target)} with {plain(ledger.setups[j])}"
        columns = ("month", *(ledger.limits[k] for k in limits), "left")
        return TextTable(title, columns, rows, frozenset(range(1, len(columns))))

    return tuple(one(j) for _, j in _pairs(windows, target))


# ------------------------------------------------------------------ what is taken for granted


def assumptions_table(assumptions: Iterable[AssumedValue], words: Callable[[object], str] = str) -> TextTable:
    """Every default that the campaign left in place, with where it comes from.

    The same default of several owners stands once; fields with one reason and the same owners share a row.
    """
    owners: dict[tuple[str, str, str], dict[str, None]] = {}
    for a in assumptions:
        field = re.sub(r"\[\d+\]", "", plain(a.field))  # goals[0].odds and goals[1].odds are one default
        owners.setdefault((field, plain(words(a.value)), plain(a.why)), {})[plain(a.owner)] = None
    shared: dict[tuple[str, str], list[str]] = {}
    for (field, value, why), names in owners.items():
        shared.setdefault((why, "; ".join(names)), []).append(f"{field} {value}")
    rows = tuple(("; ".join(fields), why, names) for (why, names), fields in shared.items())
    note = "" if rows else "nothing is assumed: the campaign states every value"
    return TextTable("Assumed, because the campaign does not say", ("assumed", "why", "of"), rows, frozenset(), note)


def facts_table(facts: Iterable[tuple[str, str, str]]) -> TextTable:
    """What was read: one line a target and one a feature."""
    rows = tuple((plain(feature) if feature else plain(target), plain(text)) for target, feature, text in facts)
    return TextTable("Understood", ("of", "what the campaign says"), rows)


def answers_table(answers: Iterable[tuple[str, str, str]]) -> TextTable:
    """First answers: one line a feature."""
    rows = tuple((feature_name(target, feature), plain(text)) for target, feature, text in answers)
    return TextTable("First answers", ("feature", "what is believed"), rows)


def ties_table(ties: Iterable[tuple[str, str]]) -> TextTable:
    """What ties the parameters of each target together."""
    rows = tuple((plain(target), plain(text)) for target, text in ties)
    return TextTable("What hangs together", ("target", "ties"), rows)
