"""One self-contained page: what the plan reaches, with what odds, and what it stands on."""

from __future__ import annotations

import base64
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from importlib.resources import files
from pathlib import Path
from typing import Any, Protocol

from planner.campaign.records import Campaign, Ring
from planner.records import Forecast, GoalResult, Plan, Progress, Windows, silent
from planner.report import figures, series, tables
from planner.report.files import write_whole
from planner.report.words import (
    SKY_CAUTIONS,
    feature_name,
    headline,
    percent,
    plain,
    realised_sentence,
    shortfall_sentence,
    with_unit,
)

TEMPLATE = "page.html.j2"
MOST_FIGURES = 24  # features with a figure of their own; the tables list every feature (keeps a page below ~5 MB)


class Understood(Protocol):
    """What was understood of a campaign: defaults left in place, first answers, ties and warnings."""

    @property
    def assumptions(self) -> Sequence[Any]:
        """Records with ``owner``, ``field``, ``value``, ``why``."""

    @property
    def answers(self) -> Sequence[tuple[str, str, str]]:
        """First answers: target, feature, text."""

    @property
    def ties(self) -> Sequence[tuple[str, str]]:
        """What ties the parameters of a target together: target, text."""

    @property
    def warnings(self) -> Sequence[str]:
        """Model assumptions that fail."""


@dataclass(frozen=True, slots=True)
class Picture:
    """A figure ready for the page."""

    source: str  # data address
    alt: str
    caption: str = ""


def write_page(
    path: str | Path,
    campaign: Campaign,
    forecast: Forecast,
    windows: Windows,
    plan: Plan,
    understood: Understood | None = None,
    *,
    progress: Progress = silent,
) -> Path:
    """Write the page; it appears whole or not at all. Raises OSError where it cannot be written."""
    text = page_html(campaign, forecast, windows, plan, understood, progress=progress)
    return write_whole(path, text.encode())


def page_html(
    campaign: Campaign,
    forecast: Forecast,
    windows: Windows,
    plan: Plan,
    understood: Understood | None = None,
    *,
    progress: Progress = silent,
) -> str:
    """Return the page as one HTML text that needs nothing from outside."""
    from jinja2 import Environment, StrictUndefined

    template = (files("planner.report") / TEMPLATE).read_text(encoding="utf-8")
    pictures = _pictures(forecast, windows, plan, progress)
    facts = {
        "campaign": plain(campaign.name),
        "note": plain(campaign.file.note),
        "season": f"{campaign.file.season.first} to {campaign.file.season.last}",
        "invented": invented_parts(campaign),
        "headline": headline(plan),
        "goals": [goal_card(goal) for goal in plan.goals],
        "goals_table": tables.goals_table(plan),
        "remarks": tables.goal_remarks(plan),
        "summary": tables.plan_summary(plan),
        "shortfall": shortfall_sentence(plan),
        "realised": realised_sentence(plan),
        "notes": [plain(note) for note in plan.notes],
        "accounts": tables.accounts_table(plan),
        "looks": tables.looks_table(plan),
        "reasons": tables.reasons_table(plan),
        "forecast_tables": _forecast_tables(forecast),
        "windows_tables": (tables.windows_season(windows), *tables.windows_months(windows)),
        "warnings": _warnings(forecast, understood),
        "assumed": tables.assumptions_table(understood.assumptions) if understood else None,
        "answers": tables.answers_table(understood.answers) if understood else None,
        "ties": tables.ties_table(understood.ties) if understood else None,
        "cautions": cautions(campaign),
        **pictures,
    }
    environment = Environment(
        autoescape=True, undefined=StrictUndefined, trim_blocks=True, lstrip_blocks=True, finalize=_unbroken
    )
    return environment.from_string(template).render(facts)


def _forecast_tables(forecast: Forecast) -> tuple[tables.TextTable, ...]:
    derived = tables.forecast_derived(forecast)
    shown = (tables.forecast_values(forecast), tables.forecast_measurable(forecast))
    return (*shown, derived) if derived.rows else shown


def _unbroken(value: Any) -> Any:
    """Keep a percent sign on the line of its number."""
    return value.replace(" %", "\u00a0%") if isinstance(value, str) else value


def goal_card(goal: GoalResult) -> Mapping[str, Any]:
    """The facts of one goal as the head of the page shows them."""
    return {
        "feature": feature_name(goal.target, goal.feature),
        "goal": plain(goal.goal),
        "odds": tables.odds_words(goal),
        "wanted": percent(goal.odds_wanted),
        "reached": goal.reached,
        "share": round(100 * min(1.0, max(0.0, goal.odds))),
        "mark": round(100 * goal.odds_wanted),
        "now": with_unit(goal.prior, goal.unit),
        "expected": with_unit(goal.expected, goal.unit),
    }


def invented_parts(campaign: Campaign) -> str:
    """Say which parts of a campaign are invented; empty if none says so."""
    if campaign.file.invented:
        return "This campaign is invented: its targets, sites and numbers describe nothing real."
    names = [t.name for t in campaign.targets if t.invented]
    names += [site.name for site in campaign.sites.values() if site.invented]
    return f"Invented, and describing nothing real: {plain(', '.join(names))}." if names else ""


def cautions(campaign: Campaign) -> list[str]:
    """The standing cautions, and the rings whose brightness is not anchored."""
    loose = [
        feature_name(t.name, f.name)
        for t in campaign.targets
        for f in t.features
        if isinstance(f, Ring) and f.brightness.seen is None
    ]
    more = [f"Not anchored on a sighting, so good to 1-2 mag only: {', '.join(loose)}."] if loose else []
    return [*SKY_CAUTIONS, *more]


def _warnings(forecast: Forecast, understood: Understood | None) -> list[str]:
    found = [*tables.forecast_warnings(forecast), *(plain(w) for w in (understood.warnings if understood else ()))]
    return list(dict.fromkeys(found))


# ------------------------------------------------------------------ figures on the page


def _picture(figure: Any, alt: str, caption: str = "") -> Picture:
    """A figure as a data address; the drawing's fixed size is dropped so that it follows the page's width."""
    svg = figures.figure_svg(figure)
    svg = re.sub(rb'<svg ([^>]*?)width="[^"]*" height="[^"]*"', rb"<svg \1", svg, count=1)
    svg = re.sub(rb'<svg ([^>]*?)height="[^"]*"([^>]*?)width="[^"]*"', rb"<svg \1\2", svg, count=1)
    return Picture("data:image/svg+xml;base64," + base64.b64encode(svg).decode(), alt, caption)


def _pictures(forecast: Forecast, windows: Windows, plan: Plan, progress: Progress) -> dict[str, Any]:
    styles = figures.setup_styles(
        tuple(sorted({*series.setups_in(forecast, windows), *(k.slot.setup for k in plan.looks)}))
    )
    chosen, left_out = figured_features(forecast, plan)
    shown = [t for t in windows.targets if t in {target for target, _ in chosen}]
    moon = series.moon_by_night(windows.nights)
    total = max(1, len(chosen) + len(shown))
    features: list[Picture] = []
    hours: list[Picture] = []
    for target, feature in chosen:
        progress("page", len(features) / total)
        features.append(_feature_picture(forecast, plan, target, feature, styles))
    for target in shown:
        progress("page", (len(features) + len(hours)) / total)
        hours.append(_windows_picture(windows, target, styles, moon))
    calendar = _picture(
        figures.calendar_figure(plan.looks, forecast.nights, styles=styles), "All looks of the plan, a line a telescope"
    )
    progress("page", 1.0)
    return {
        "feature_pictures": features,
        "windows_pictures": hours,
        "calendar": calendar,
        "left_out": left_out,
    }


def figured_features(forecast: Forecast, plan: Plan) -> tuple[list[tuple[str, str]], int]:
    """Features that get a figure (those with looks first), and how many get none."""
    looked = {k.slot.target for k in plan.looks}
    every = series.features_of(forecast)
    first = sorted(every, key=lambda pair: pair[0] not in looked)[:MOST_FIGURES]
    return [pair for pair in every if pair in first], len(every) - len(first)


def _feature_picture(
    forecast: Forecast, plan: Plan, target: str, feature: str, styles: dict[str, figures.Style]
) -> Picture:
    figure = figures.feature_figure(forecast, target, feature, plan.looks, styles=styles)
    name = feature_name(target, feature)
    observables = ", ".join(b.observable for b in series.bands_of(forecast, target, feature)[: figures.MOST_BANDS])
    return _picture(figure, f"Forecast of {name} against date: {plain(observables)}, and the chance to measure it")


def _windows_picture(windows: Windows, target: str, styles: dict[str, figures.Style], moon: Any) -> Picture:
    shown = moon if series.moon_matters(windows, target) else None
    figure = figures.windows_figure(windows, target, styles=styles, moon=shown)
    return _picture(figure, f"Hours a night in which {plain(target)} can be observed, a line a setup")
