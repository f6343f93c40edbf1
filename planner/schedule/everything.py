"""What all slots of the season together could teach, every limit ignored: said before planning."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.prediction.information import gathered, information, learned_directions
from planner.records import Floats, lock
from planner.schedule.problem import CountPart, Problem, TargetPart


@dataclass(frozen=True)
class GoalCeiling:
    """The best that any set of looks could do for one goal."""

    name: str
    prior_median_sd: float  # one standard deviation now, median over draws; nan for goals of looks
    median_sd: float  # with every slot; nan for goals of looks
    mean_count: float  # expected usable looks with every slot; nan for precision goals
    utility: float  # mean over draws of min(1, reached / wanted)

    @property
    def reachable(self) -> bool:
        """True when every draw reaches the goal with everything taken."""
        return self.utility >= 1.0 - 1e-9


@dataclass(frozen=True)
class Ceiling:
    """Goals of one target with every slot taken, and what the slots see best and worst."""

    name: str
    goals: tuple[GoalCeiling, ...]
    gains: Floats  # (P,) ascending: by how much the information about each combination grows; 1 = nothing learned
    combinations: Floats  # (P, P) those combinations as columns, over the parameters of the target

    def __post_init__(self) -> None:
        lock(self)

    @property
    def worst(self) -> Floats:
        """The combination that the slots teach least about, (P,)."""
        return self.combinations[:, 0]

    @property
    def best(self) -> Floats:
        """The combination that the slots teach most about, (P,)."""
        return self.combinations[:, -1]


def everything(problem: Problem) -> tuple[Floats, ...]:
    """Return what all slots together could reach, one array a target; every limit is ignored.

    For each goal the median standard deviation over draws, or the expected number of usable looks.
    """
    return tuple(
        np.array([goal.mean_count if np.isnan(goal.median_sd) else goal.median_sd for goal in ceiling(part).goals])
        for part in problem.targets
    )


def ceiling(part: TargetPart) -> Ceiling:
    """Return what all slots of one target could do for its goals, and what they see best and worst.

    Chances of weather count as in the plan: each slot adds its expected information.
    """
    full = gathered(part.prior_precision, part.rows, part.chance)
    goals = []
    for goal in part.goals:
        if isinstance(goal, CountPart):
            counts = goal.usable @ part.chance
            share = float(np.minimum(1.0, counts / goal.wanted).mean())
            goals.append(GoalCeiling(goal.name, np.nan, np.nan, float(counts.mean()), share))
            continue
        before = information(part.prior_precision[None], goal.gradient)
        after = information(full, goal.gradient)
        share = float(np.minimum(1.0, after / goal.wanted).mean())
        with np.errstate(divide="ignore"):
            sd_before, sd_after = 1.0 / np.sqrt(before), 1.0 / np.sqrt(after)
        goals.append(GoalCeiling(goal.name, float(np.median(sd_before)), float(np.median(sd_after)), np.nan, share))
    gains, combinations = learned_directions(part.prior_precision, full.mean(axis=0))
    return Ceiling(part.name, tuple(goals), gains, combinations)
