"""Chances that goals are reached, over simulated seasons.

The truth of a season is one fresh draw of the belief; looks succeed or not as the simulated weather says; a look
that succeeds adds its rows at that draw. A goal is met when the local precision at the true draw is at or below
what is wanted (or enough looks were usable). Lost looks are not made up for: the odds are on the careful side.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.errors import DomainError
from planner.prediction.information import information
from planner.records import Bools, Floats, Ints
from planner.schedule.problem import CountPart, TargetPart

_CHUNK_FLOATS = 4_000_000  # near 32 MB of matrices at a time
_ROUND_OFF = 1e-9  # relative; a goal met exactly counts as met


@dataclass(frozen=True)
class GoalOdds:
    """What simulated seasons say about one goal."""

    name: str
    odds: float  # share of seasons that meet it
    odds_error: float  # standard error of ``odds``
    median_sd: float  # median over seasons of one standard deviation of the quantity; nan for goals of looks
    mean_count: float  # mean number of usable looks; nan for precision goals

    @property
    def typical(self) -> float:
        """Median standard deviation, or mean number of usable looks."""
        return self.mean_count if np.isnan(self.median_sd) else self.median_sd


def simulate_odds(
    part: TargetPart, clear: Bools, rng: np.random.Generator, taken: Ints | None = None
) -> tuple[GoalOdds, ...]:
    """Return the odds of every goal of one target.

    ``part``: its ``rows`` (N, K_i, M, P) and goals hold N fresh draws, not those of the planning. ``clear``:
    (seasons, looks), True where a look succeeds. ``taken``: (looks,) local slots of the looks; every slot of the
    part when left out. The true draw of each season is chosen by ``rng``, every draw equally often to one season.
    Raises DomainError when the shapes do not fit.
    """
    index = np.arange(part.slots.size) if taken is None else np.asarray(taken, dtype=np.int64)
    if clear.ndim != 2 or clear.shape[0] == 0 or clear.shape[1] != index.size:
        raise DomainError("clear", f"shape {clear.shape}", f"(seasons, {index.size}) for the looks of {part.name}")
    truth = _true_draws(part.rows.shape[0], clear.shape[0], rng)
    return _of_target(part, index, clear, truth)


def simulate_all_odds(
    parts: Sequence[TargetPart], taken: Sequence[Ints], clear: Bools, rng: np.random.Generator
) -> tuple[tuple[GoalOdds, ...], ...]:
    """Return the odds of every goal of every target, for one table of successes.

    ``clear``: (seasons, looks), columns in the order of ``taken`` joined target by target.
    """
    ends = np.cumsum([len(index) for index in taken])
    if len(parts) != len(taken) or clear.ndim != 2 or clear.shape[1] != int(ends[-1] if ends.size else 0):
        raise DomainError("clear", f"shape {clear.shape}", "(seasons, looks of all targets)")
    pieces = np.split(clear, ends[:-1], axis=1) if ends.size else []
    return tuple(
        simulate_odds(part, piece, rng, index) for part, piece, index in zip(parts, pieces, taken, strict=True)
    )


def standard_error(met: int, seasons: int) -> float:
    """Standard error of a share: that of the posterior of a share with a flat prior (Laplace), never 0."""
    share = (met + 1.0) / (seasons + 2.0)
    return float(np.sqrt(share * (1.0 - share) / (seasons + 3.0)))


def _true_draws(draws: int, seasons: int, rng: np.random.Generator) -> Ints:
    rounds = -(-seasons // draws)
    return np.concatenate([rng.permutation(draws) for _ in range(max(1, rounds))])[:seasons]


def _of_target(part: TargetPart, index: Ints, clear: Bools, truth: Ints) -> tuple[GoalOdds, ...]:
    seasons = truth.size
    reached = {g: np.empty(seasons) for g in range(len(part.goals))}
    size = part.prior_precision.shape[0]
    observables = part.rows.shape[2]
    step = max(1, _CHUNK_FLOATS // max(1, size * (size + index.size * observables)))
    for low in range(0, seasons, step):
        b, ok = truth[low : low + step], clear[low : low + step]
        rows = part.rows[b[:, None], index[None, :]] * ok[:, :, None, None]  # (S, n, M, P)
        flat = rows.reshape(b.size, index.size * observables, size)
        matrices = part.prior_precision + flat.transpose(0, 2, 1) @ flat
        for g, goal in enumerate(part.goals):
            if isinstance(goal, CountPart):
                reached[g][low : low + step] = np.sum(goal.usable[b[:, None], index[None, :]] * ok, axis=1)
            else:
                reached[g][low : low + step] = information(matrices, goal.gradient[b])
    return tuple(_summary(part, g, reached[g], truth) for g in range(len(part.goals)))


def _summary(part: TargetPart, g: int, reached: Floats, truth: Ints) -> GoalOdds:
    goal = part.goals[g]
    wanted = goal.wanted if isinstance(goal, CountPart) else goal.wanted[truth]
    met = int(np.sum(reached >= wanted * (1.0 - _ROUND_OFF)))
    share = met / reached.size if reached.size else float("nan")
    if isinstance(goal, CountPart):
        return GoalOdds(goal.name, share, standard_error(met, reached.size), float("nan"), float(reached.mean()))
    with np.errstate(divide="ignore"):
        sd = 1.0 / np.sqrt(reached)
    return GoalOdds(goal.name, share, standard_error(met, reached.size), float(np.median(sd)), float("nan"))
