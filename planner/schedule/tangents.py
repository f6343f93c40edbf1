"""Linear over-estimates of a goal's utility in the looks taken.

For any v with c'v = 1, I(F(x)) <= v'F_base v + sum_k p_k (g_k.v)^2 x_k. For each draw the lower of that line (over
the information wanted) and 1 is used, whichever is lower at the point asked for; a coefficient is cut at
1 - constant, which changes nothing for whole x and tightens the bound. Fixed looks belong to the constant.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.prediction.information import gathered, information, least_direction
from planner.records import Floats, Ints, lock
from planner.schedule.problem import CountPart, LearnPart, TargetPart


@dataclass(frozen=True)
class Tangent:
    """u <= constant + coefficients . x for every set of looks that holds the fixed ones."""

    goal: int
    constant: float
    coefficients: Floats  # (K_i,), 0 for fixed looks

    def __post_init__(self) -> None:
        lock(self)


def tangents_at(part: TargetPart, index: Ints, shares: Floats) -> list[tuple[float, Tangent]]:
    """Return, for each goal, its utility at a fractional point and the tangent there.

    ``index``: (n,) local slots of the point, ``shares``: (n,); fixed looks not listed are added whole.
    """
    base = np.flatnonzero(part.forced)
    point = np.zeros(part.slots.size)
    point[index] = shares
    point[base] = 1.0
    support = np.flatnonzero(point > 0.0)
    taken = part.chance[support] * point[support]
    f_base = gathered(part.prior_precision, part.rows[:, base], part.chance[base])
    f_here = gathered(part.prior_precision, part.rows[:, support], taken)
    result = []
    for g, goal in enumerate(part.goals):
        if isinstance(goal, CountPart):
            here, constant, slope = _count_lines(part, goal, base, support, taken)
        else:
            here, constant, slope = _learn_lines(part, goal, f_base, f_here)
        flat = (here >= 1.0) | (constant >= 1.0)
        constant = np.where(flat, 1.0, constant)
        slope = np.minimum(slope, (1.0 - constant)[:, None])
        slope[:, base] = 0.0
        line = Tangent(g, float(constant.mean()), slope.mean(axis=0))
        result.append((float(np.mean(np.minimum(1.0, here))), line))
    return result


def _learn_lines(part: TargetPart, goal: LearnPart, f_base: Floats, f_here: Floats) -> tuple[Floats, Floats, Floats]:
    here = information(f_here, goal.gradient) / goal.wanted
    v = least_direction(f_here, goal.gradient)  # (B, P)
    constant = np.einsum("bp,bpq,bq->b", v, f_base, v) / goal.wanted
    draws, slots, observables, size = part.rows.shape
    along = (part.rows.reshape(draws, slots * observables, size) @ v[:, :, None])[..., 0]
    squares = np.sum(along.reshape(draws, slots, observables) ** 2, axis=2)
    return here, constant, squares * part.chance / goal.wanted[:, None]


def _count_lines(
    part: TargetPart, goal: CountPart, base: Ints, support: Ints, taken: Floats
) -> tuple[Floats, Floats, Floats]:
    slope = goal.usable * part.chance / goal.wanted
    constant = slope[:, base].sum(axis=1)
    here = (goal.usable[:, support] @ taken) / goal.wanted
    return here, constant, slope
