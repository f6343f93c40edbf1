"""What a set of looks of one target is worth.

Two measures. By *expected information*, u(E F): concave, cheap, and always too hopeful (Jensen's inequality); it
serves bounds and prices. *Realised*, E u(F): the mean over clear and lost looks, which is what a plan is chosen by.
Losses of different looks are taken as independent here; the chain of the weather enters the simulated odds.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from planner.prediction.information import gathered, information
from planner.records import Floats, Ints
from planner.schedule.problem import CountPart, GoalPart, LearnPart, TargetPart

EXACT_LOOKS = 7  # up to 2^7 outcomes are summed; above that they are sampled (sampled error ~ 1 % of the spread)
OUTCOMES = 256  # sampled outcomes
_CHUNK_FLOATS = 4_000_000  # matrices of one chunk of outcomes stay near 32 MB


def weights(part: TargetPart) -> Floats:
    """Weights of the goals of a target, (G,)."""
    return np.array([goal.weight for goal in part.goals], dtype=float)


def expected_utilities(part: TargetPart, chosen: Sequence[int] | Ints, shares: Floats | None = None) -> Floats:
    """Utility of each goal by expected information, (G,), each in [0, 1].

    ``chosen``: (n,) local slots; ``shares``: (n,) in [0, 1], how much of each is taken (1 when left out).
    """
    index = np.asarray(chosen, dtype=np.int64)
    taken = part.chance[index] * (1.0 if shares is None else shares)
    matrix = gathered(part.prior_precision, part.rows[:, index], taken)
    return np.array([_expected(goal, matrix, index, taken) for goal in part.goals])


def utilities_without_looks(part: TargetPart) -> Floats:
    """Utility of each goal with no look at all, (G,)."""
    return expected_utilities(part, np.empty(0, dtype=np.int64))


def value_of(part: TargetPart, utilities: Floats, start: Floats | None = None) -> float:
    """Sum over the goals of weight x (utility - utility without looks)."""
    start = utilities_without_looks(part) if start is None else start
    return float(weights(part) @ (utilities - start))


def draw_luck(seed: int, target: int, slots: int, outcomes: int = OUTCOMES) -> Floats:
    """Common random numbers of one target, (outcomes, slots) in (0, 1).

    Each slot's numbers are stratified (one in each of ``outcomes`` equal steps), so that every slot is clear in
    its exact share of outcomes to 1 / outcomes. Two sets of looks judged with the same numbers differ by what
    they are, not by luck.
    """
    rng = np.random.default_rng([seed, 7, target])
    steps = np.argsort(rng.random((outcomes, slots)), axis=0)
    return np.asarray((steps + rng.random((outcomes, slots))) / outcomes)


def realised_utilities(part: TargetPart, chosen: Sequence[int] | Ints, luck: Floats) -> Floats:
    """Expected realised utility of each goal, (G,): the mean over clear and lost looks.

    ``luck``: (outcomes, K) from `draw_luck`, used above `EXACT_LOOKS` looks. Looks that are certain (chance 1)
    or impossible (chance 0) are no source of outcomes.
    """
    index = np.asarray(chosen, dtype=np.int64)
    chance = part.chance[index]
    open_looks = np.flatnonzero((chance > 0.0) & (chance < 1.0))
    sure = np.where(chance >= 1.0, 1.0, 0.0)
    if open_looks.size <= EXACT_LOOKS:
        patterns = (np.arange(2**open_looks.size)[:, None] >> np.arange(open_looks.size)[None, :]) & 1
        p = chance[open_looks]
        odds = np.prod(np.where(patterns == 1, p, 1.0 - p), axis=1)
    else:
        patterns = (luck[:, index[open_looks]] < chance[open_looks]).astype(np.int64)
        patterns, counts = np.unique(patterns, axis=0, return_counts=True)
        odds = counts / luck.shape[0]
    clear = np.tile(sure, (odds.size, 1))
    clear[:, open_looks] = patterns
    utilities = odds @ _utilities_of_outcomes(part, index, clear)
    if open_looks.size <= EXACT_LOOKS:
        return np.asarray(utilities)
    # u(E F) is above E u(F) for certain (Jensen), so a sampled mean above it is sampling error
    return np.minimum(utilities, expected_utilities(part, index))


def _utilities_of_outcomes(part: TargetPart, index: Ints, clear: Floats) -> Floats:
    """Utilities (O, G) when exactly the looks marked 1 in ``clear`` (O, n) succeed."""
    rows = part.rows[:, index]
    draws, looks, _, size = rows.shape
    teach = any(isinstance(goal, LearnPart) for goal in part.goals)
    result = np.empty((clear.shape[0], len(part.goals)))
    each = rows.transpose(0, 1, 3, 2) @ rows if teach else np.zeros((draws, looks, 0, 0))
    flat = each.transpose(1, 0, 2, 3).reshape(looks, draws * each.shape[2] ** 2)  # (n, B P P)
    step = max(1, _CHUNK_FLOATS // max(1, draws * size * size))
    for low in range(0, clear.shape[0], step):
        some = clear[low : low + step]
        matrices = None
        if teach:
            matrices = part.prior_precision + (some @ flat).reshape(some.shape[0], draws, size, size)
        learned = _reached(part, matrices) if matrices is not None else {}
        for g, goal in enumerate(part.goals):
            if isinstance(goal, CountPart):
                counts = some @ goal.usable[:, index].T  # (O, B)
                result[low : low + step, g] = np.mean(np.minimum(1.0, counts / goal.wanted), axis=1)
            else:
                ratio = learned[g] / goal.wanted
                result[low : low + step, g] = np.mean(np.minimum(1.0, ratio), axis=1)
    return result


def _reached(part: TargetPart, matrices: Floats) -> dict[int, Floats]:
    """Information about each precision goal, (O, B), by its number; ``matrices``: (O, B, P, P).

    One factorisation serves all goals; anything odd about it is left to the careful function.
    """
    goals = {g: goal for g, goal in enumerate(part.goals) if isinstance(goal, LearnPart)}
    gradients = np.stack([goal.gradient for goal in goals.values()], axis=2)  # (B, P, G)
    try:
        solved = np.linalg.solve(matrices, np.broadcast_to(gradients, (*matrices.shape[:2], *gradients.shape[1:])))
        q = np.sum(gradients * solved, axis=2)  # (O, B, G)
        sound = bool(np.all(np.isfinite(q) & (q > 0.0)))
    except np.linalg.LinAlgError:
        sound = False
    if sound:
        return {g: 1.0 / q[:, :, i] for i, g in enumerate(goals)}
    return {g: information(matrices, goal.gradient[None]) for g, goal in goals.items()}


def _expected(goal: GoalPart, matrix: Floats, index: Ints, taken: Floats) -> float:
    if isinstance(goal, CountPart):
        reached = (goal.usable[:, index] @ taken) / goal.wanted
    else:
        reached = information(matrix, goal.gradient) / goal.wanted
    return float(np.mean(np.minimum(1.0, reached)))


def total_weight(parts: Iterable[TargetPart]) -> float:
    """Sum of the weights of all goals."""
    return float(sum(goal.weight for part in parts for goal in part.goals))
