"""Invented planning problems: no campaign, no physics; numbers only."""

from __future__ import annotations

import numpy as np

from planner.schedule.problem import CountPart, LearnPart, Problem, TargetPart


def invented_problem(
    seed: int,
    *,
    targets: int = 3,
    setups: int = 2,
    nights: int = 4,
    chance_of_slot: float = 0.6,
    draws: int = 4,
    size: int = 3,
    observables: int = 2,
    at_least_days: float = 0.5,
    at_most_days: float = np.inf,
    hours: float = 3.0,
    night_hours: float = 8.0,
    most_minutes: int = 180,
    tell: float = 0.6,
    counts: bool = True,
) -> Problem:
    """Return a problem whose slots are drawn at random; minutes and windows are whole minutes."""
    rng = np.random.default_rng(seed)
    owner, allocation, night, minutes, early, late = [], [], [], [], [], []
    for t in range(targets):
        for s in range(setups):
            for n in range(nights):
                if rng.random() < chance_of_slot:
                    length = int(rng.integers(30, most_minutes + 1))
                    room = int(night_hours * 60)
                    begin = int(rng.integers(0, max(1, room - length)))
                    end = int(rng.integers(begin + length, room + 1)) if begin + length < room else room
                    owner.append(t), allocation.append(s), night.append(n), minutes.append(length)
                    early.append(60000.0 + n + 0.25 + begin / 1440), late.append(60000.0 + n + 0.25 + end / 1440)
    owner_, early_, late_ = np.array(owner, dtype=np.int64), np.array(early), np.array(late)
    minutes_ = np.array(minutes, dtype=float)
    parts = []
    for t in range(targets):
        mine = np.flatnonzero(owner_ == t)
        middle = 0.5 * (early_ + late_)[mine]
        order = np.argsort(middle, kind="stable")
        mine, middle = mine[order], middle[order]
        base = rng.normal(size=(1, mine.size, observables, size)) * tell
        rows = base * (1.0 + 0.3 * rng.normal(size=(draws, mine.size, 1, size)))
        rows *= np.sqrt(minutes_[mine] / 90.0)[None, :, None, None]
        rows *= (rng.random((draws, mine.size)) < 0.85)[:, :, None, None]
        gradient = np.tile(rng.normal(size=size), (draws, 1)) + 0.1 * rng.normal(size=(draws, size))
        goals: list[LearnPart | CountPart] = [
            LearnPart("learn", float(rng.integers(1, 4)), gradient, np.full(draws, 4.0 / size))
        ]
        if counts and t % 2 == 1:
            usable = (rng.random((draws, mine.size)) < 0.8).astype(float)
            goals.append(CountPart("looks", 1.0, usable, 3.0))
        parts.append(
            TargetPart(
                name=f"invented {t}",
                prior_precision=np.eye(size),
                goals=tuple(goals),
                slots=mine,
                chance=rng.uniform(0.4, 0.95, size=mine.size),
                rows=rows,
                middle_mjd=middle,
                at_least_days=at_least_days,
                at_most_days=at_most_days,
                forced=np.zeros(mine.size, dtype=bool),
            )
        )
    return Problem(
        targets=tuple(parts),
        owner=owner_,
        allocation=np.array(allocation, dtype=np.int64),
        telescope=np.array(allocation, dtype=np.int64) // 2,
        night=np.array(night, dtype=np.int64),
        minutes=minutes_,
        charge=minutes_.copy(),
        earliest_mjd=early_,
        latest_mjd=late_,
        limits=np.full(setups, hours * 60.0),
    )
