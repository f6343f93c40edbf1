"""How numbers, dates and names are written for people, and the sentences the tool says about itself."""

from __future__ import annotations

import math
import re
import unicodedata
from collections.abc import Iterable

from planner.records import Forecast, Outcome, Plan

NOTHING = "–"

SKY_CAUTIONS = (
    "No optical look is planned closer to the Sun than the setup's keep-out; the site's own Sun rule comes first.",
    "lightlag plans; it does not operate a telescope. Closing for weather, wind and humidity, hardware limits, "
    "and work at height or at night follow the site's own rules and the staff on duty.",
    "Absolute surface brightness is uncertain by 1-2 mag unless it is anchored on a measurement: "
    "exposure times of unanchored rings share that uncertainty.",
)
"""Cautions that stand on every page and under every plan."""

_OUTCOMES = {
    Outcome.PROVEN: "The shortfall is within the tolerance of the proof, so no other plan can be noticeably better.",
    Outcome.GOOD: "The plan is good but not proven best: a longer search may find or rule out a better one.",
    Outcome.STOPPED: "The search was stopped early; the plan keeps every limit, and a longer search may improve it.",
    Outcome.IMPOSSIBLE: "No plan keeps every limit.",
}


def plain(text: str) -> str:
    """Return text on one line: control characters dropped, white space runs to one blank."""
    kept = "".join(c if not unicodedata.category(c).startswith("C") else " " for c in text)
    return " ".join(kept.split())


def number(value: float, digits: int = 3) -> str:
    """Return a number with ``digits`` significant digits, without an exponent where that stays short."""
    if math.isnan(value):
        return NOTHING
    if math.isinf(value):
        return "unlimited" if value > 0 else "-unlimited"
    if value == 0.0:
        return "0"
    size = math.floor(math.log10(abs(float(f"{value:.{digits - 1}e}"))))
    if not -4 <= size <= 6:
        return f"{value:.{digits - 1}e}"
    return f"{value:.{max(0, digits - 1 - size)}f}"


def hours(value: float) -> str:
    """Return hours to a tenth."""
    return NOTHING if math.isnan(value) else f"{value:.1f}"


def percent(share: float, digits: int = 0) -> str:
    """Return a share as percent; a share that is small but not zero is never written as 0."""
    if math.isnan(share):
        return NOTHING
    least = 10.0**-digits
    value = 100.0 * share
    if 0.0 < value < least / 2:
        return f"< {least:.{digits}f} %"
    if 100.0 - least / 2 < value < 100.0:
        return f"> {100.0 - least:.{digits}f} %"
    return f"{value:.{digits}f} %"


def with_unit(value: float, unit: str, digits: int = 3) -> str:
    """Return a number with its unit."""
    return f"{number(value, digits)} {unit}".strip() if math.isfinite(value) else number(value)


def feature_name(target: str, feature: str) -> str:
    """Return a feature's name, led by its target where the name alone would not say whose it is."""
    return plain(feature) if target in feature else plain(f"{target}: {feature}")


def night_of(forecast: Forecast, mjd: float) -> str:
    """Return the night of the season nearest to a forecast moment (dash for nan)."""
    if math.isnan(mjd):
        return NOTHING
    return forecast.nights[int(abs(forecast.mjd - mjd).argmin())]


def slug(text: str, taken: Iterable[str] = ()) -> str:
    """Return a safe file stem for a name, different from every one in ``taken``."""
    folded = unicodedata.normalize("NFKD", text).encode("ascii", "ignore").decode()
    stem = re.sub(r"[^a-z0-9]+", "-", folded.lower()).strip("-")[:60] or "figure"
    found, count = stem, 2
    while found in set(taken):
        found, count = f"{stem}-{count}", count + 1
    return found


def shortfall_sentence(plan: Plan) -> str:
    """Say in one or two sentences how good the plan is against the bound."""
    if plan.outcome is Outcome.IMPOSSIBLE:
        return _OUTCOMES[plan.outcome]
    if plan.best_possible <= 1e-12:
        return "Nothing is left to gain: every goal is already met, or no slot of the season can teach anything."
    first = (
        f"No plan within the same limits can be worth more than {number(plan.best_possible, 4)}; "
        f"this one is worth {number(plan.value, 4)}, {percent(plan.shortfall, 1)} below that bound."
    )
    return f"{first} {_OUTCOMES[plan.outcome]}"


def realised_sentence(plan: Plan) -> str:
    """Say what weather, failures and the spread of the belief leave of the value."""
    if plan.value <= 1e-12:
        return ""
    share = plan.value_realised / plan.value
    return (
        f"After weather, failures and the spread of what is believed, {number(plan.value_realised, 4)} of it "
        f"is expected to come true ({percent(share)}); the odds of the goals count all of that."
    )


def headline(plan: Plan) -> str:
    """Say in one line how many goals the plan reaches with the odds asked for."""
    count, reached = len(plan.goals), sum(goal.reached for goal in plan.goals)
    if count == 0:
        return f"{len(plan.looks)} looks planned; no goal is stated"
    every = "the only goal" if count == 1 else f"all {count} goals"
    if reached == count:
        what = f"reach {every} with the odds asked for"
    elif reached == 0:
        what = (
            f"do not reach {every} with the odds asked for"
            if count == 1
            else f"reach none of the {count} goals with the odds asked for"
        )
    else:
        what = f"reach {reached} of {count} goals with the odds asked for"
    return f"{len(plan.looks)} looks {what}"
