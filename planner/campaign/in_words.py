"""What was read, in words: every value the user wrote, flattened to one line per feature."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterator, Mapping
from typing import Any

from pydantic import BaseModel

from planner.campaign.goals import LearnGoal, LooksGoal
from planner.campaign.laws import Law
from planner.campaign.records import Campaign, Target

SKIPPED = {"source", "curve", "goals", "features", "target", "invented", "note"}  # said elsewhere


def facts_of(campaign: Campaign) -> list[tuple[str, str, str]]:
    """One row per target and per feature: (target, feature or "", what was written)."""
    rows: list[tuple[str, str, str]] = []
    for target in campaign.targets:
        rows.append((target.name, "", _target_words(campaign, target)))
        for feature in target.features:
            goals = "; ".join(goal_words(goal) for goal in feature.goals) or "none"
            rows.append(
                (target.name, feature.name, f"{', '.join(_written(feature, skip=feature.name))}; goals: {goals}")
            )
    return rows


def goal_words(goal: LearnGoal | LooksGoal) -> str:
    """A goal in the user's words."""
    if isinstance(goal, LooksGoal):
        return f"{goal.looks} usable epochs"
    return goal.words


def _target_words(campaign: Campaign, target: Target) -> str:
    programme = campaign.programme_of(target)
    position = f"ICRS {target.position.ra_deg:.5f} {target.position.dec_deg:+.5f} deg"
    rest = [part for part in _written(target, skip=target.name) if not part.startswith("position.")]
    return f"{position}; programme {programme.name}, weight {campaign.weight_of(target):g}; {', '.join(rest)}".rstrip(
        "; "
    )


def _written(value: Any, name: str = "", *, skip: str = "") -> Iterator[str]:
    """Dotted name and value of everything that the user wrote."""
    if isinstance(value, Law):
        yield f"{name} {value.words()}"
    elif isinstance(value, BaseModel):
        for key, field in type(value).model_fields.items():
            if key in value.model_fields_set and key not in SKIPPED:
                inner = getattr(value, key)
                if isinstance(inner, str) and inner == skip:
                    continue
                yield from _written(inner, f"{name}.{field.alias or key}".lstrip("."))
    elif isinstance(value, Mapping):
        for key, inner in value.items():
            yield from _written(inner, f"{name}.{key}")
    elif isinstance(value, (list, tuple)):
        pair = len(value) == 2 and not any(isinstance(v, BaseModel) for v in value)
        yield f"{name} {' to '.join(_short(v) for v in value)}" if pair else f"{name} ({len(value)} entries)"
    elif value is not None:
        yield f"{name} {_short(value)}"


def _short(value: Any) -> str:
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:g}"
    if isinstance(value, dt.date | dt.datetime):
        return value.isoformat()
    return str(value)
