"""How close to its bound, how fast and in how much memory the solver plans: invented targets x 6 setups x nights.

Run: python tests/benchmarks/plan_size.py [--targets 200] [--nights 183] [--seconds 300] [--draws 16]
Hours per setup are 100, 50 and 25 for 200 targets and shrink with their number. Prints one JSON object. The targets
are moving features on straight, slightly bent paths that fade; every number is invented.
"""

from __future__ import annotations

import argparse
import json
import resource
import time

import numpy as np

from planner.schedule.problem import LearnPart, Problem, TargetPart
from planner.schedule.solve import solve

SETUPS = 6
TELESCOPES = 3
SIGMA = np.array([0.07, 0.10, 0.05, 0.08, 0.06, 0.12])  # error of a position with each setup, invented unit
MINUTES = np.array([30.0, 20.0, 45.0, 25.0, 38.0, 15.0])


def moving_problem(targets: int, nights: int, hours: float, draws: int = 16, seed: int = 1) -> Problem:
    """Targets with place, speed and bending in two directions (6 parameters), 2 observables a look."""
    rng = np.random.default_rng(seed)
    parts, owner, setup_of, night_of, early, late = [], [], [], [], [], []
    for t in range(targets):
        n, s, start, end = _windows(rng, nights)
        first = len(owner)
        middle = 60000.0 + n + 0.5 * (start + end)
        order = np.argsort(middle, kind="stable")
        n, s, start, end, middle = n[order], s[order], start[order], end[order], middle[order]
        owner += [t] * n.size
        setup_of += s.tolist()
        night_of += n.tolist()
        early += (60000.0 + n + start).tolist()
        late += (60000.0 + n + end).tolist()
        parts.append(_target(rng, t, np.arange(first, first + n.size), middle, s, nights, draws))
    setups = np.array(setup_of, dtype=np.int64)
    minutes = MINUTES[setups]
    return Problem(
        targets=tuple(parts),
        owner=np.array(owner, dtype=np.int64),
        allocation=setups,
        telescope=setups % TELESCOPES,
        night=np.array(night_of, dtype=np.int64),
        minutes=minutes,
        charge=minutes.copy(),
        earliest_mjd=np.array(early),
        latest_mjd=np.array(late),
        limits=np.full(SETUPS, hours * 60.0),
    )


def _windows(rng: np.random.Generator, nights: int) -> tuple[np.ndarray, np.ndarray, np.ndarray, np.ndarray]:
    """Nights, setups, and the window of each slot in days after the start of its night."""
    up = rng.uniform(-0.3, 0.7)  # when the target culminates in the first night, in days; 4 min earlier each night
    n, s = (a.ravel() for a in np.meshgrid(np.arange(nights), np.arange(SETUPS), indexing="ij"))
    middle = (up - n / 365.25) % 1.0
    half = rng.uniform(0.1, 0.2)
    start, end = np.maximum(0.0, middle - half), np.minimum(0.4, middle + half)
    good = (end - start >= MINUTES[s] / 1440.0 + 0.002) & (rng.random(n.size) < 0.85)
    return n[good], s[good], start[good], end[good]


def _target(
    rng: np.random.Generator, number: int, slots: np.ndarray, middle: np.ndarray, s: np.ndarray, nights: int, draws: int
) -> TargetPart:
    phase = (middle - 60000.0) / nights
    fade = rng.uniform(0.2, 1.2) * np.exp(0.3 * rng.normal(size=(draws, 1)))
    level = np.exp(0.3 * rng.normal(size=(draws, 1))) * np.exp(-fade * phase)  # brightness of each draw
    error = SIGMA[s] / level
    basis = np.stack((np.ones_like(phase), phase, 0.5 * phase**2), axis=1)  # (K, 3)
    rows = np.zeros((draws, slots.size, 2, 6))
    rows[:, :, 0, :3] = basis / error[:, :, None]
    rows[:, :, 1, 3:] = basis / error[:, :, None]
    rows *= (level > 0.3)[:, :, None, None]
    pa = rng.uniform(0.0, 2 * np.pi) + 0.2 * rng.normal(size=draws)
    speed = np.zeros((draws, 6))
    speed[:, 1], speed[:, 4] = np.cos(pa), np.sin(pa)
    bend = np.zeros((draws, 6))
    bend[:, 2], bend[:, 5] = -np.sin(pa), np.cos(pa)
    goals = (
        LearnPart("speed", float(rng.uniform(0.5, 2.0)), speed, np.full(draws, 1 / rng.uniform(0.25, 0.5) ** 2)),
        LearnPart("bend", float(rng.uniform(0.2, 1.0)), bend, np.full(draws, 1 / rng.uniform(0.6, 0.9) ** 2)),
    )
    return TargetPart(
        name=f"invented {number}",
        prior_precision=np.diag(1 / np.array([1.0, 1.0, 1.0, 1.0, 1.0, 1.0]) ** 2),
        goals=goals,
        slots=slots,
        chance=np.clip(0.65 + 0.1 * np.sin(2 * np.pi * phase + s), 0.05, 0.95),
        rows=rows,
        middle_mjd=middle,
        at_least_days=7.0,
        at_most_days=np.inf,
        forced=np.zeros(slots.size, dtype=bool),
    )


def main() -> None:
    """Solve at three levels of tightness and print what came out."""
    parser = argparse.ArgumentParser()
    parser.add_argument("--targets", type=int, default=200)
    parser.add_argument("--nights", type=int, default=183)
    parser.add_argument("--draws", type=int, default=16)
    parser.add_argument("--seconds", type=float, default=300.0)
    parser.add_argument("--hours", type=float, nargs="*", default=[100.0, 50.0, 25.0])
    given = parser.parse_args()
    levels = []
    for hours in given.hours:
        problem = moving_problem(given.targets, given.nights, hours * given.targets / 200.0, given.draws)
        begin, cpu = time.monotonic(), time.process_time()
        plan = solve(problem, seed=1, seconds=given.seconds)
        weight = sum(goal.weight for part in problem.targets for goal in part.goals)
        levels.append(
            {
                "hours_per_setup_at_200_targets": hours,
                "slots": problem.size,
                "looks": int(plan.slots.size),
                "best_possible_share_of_weights": round(plan.best_possible / weight, 4),
                "proof_shortfall_percent": round(100 * plan.proof_shortfall, 4),
                "shortfall_percent": round(100 * plan.shortfall, 4),
                "value_realised_over_value": round(plan.value_realised / plan.value, 4) if plan.value else None,
                "outcome": plan.outcome.value,
                "rounds": plan.rounds,
                "seconds": round(time.monotonic() - begin, 1),
                "processor_seconds": round(time.process_time() - cpu, 1),
            }
        )
    peak_gb = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024**2
    sizes = {"targets": given.targets, "setups": SETUPS, "nights": given.nights, "draws": given.draws}
    print(json.dumps({**sizes, "levels": levels, "peak_memory_gb": round(peak_gb, 3)}, indent=1))


if __name__ == "__main__":
    main()
