"""Sets of looks of one target that are worth more than they cost at given prices.

Heuristic: grow by gain over cost, then add, drop and swap while the net gain rises. All candidates are judged at
once by a low-rank update of the information. No randomness of its own: a generator is passed in where costs are
shaken, and ties go to the earliest slot.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.prediction.information import gathered, information_after
from planner.records import Bools, Floats, Ints
from planner.schedule.problem import CountPart, LearnPart, Spacing, TargetPart
from planner.schedule.utility import expected_utilities, utilities_without_looks, value_of, weights

PASSES = 6  # of add, drop and swap; two or three usually end it
COMPLETE_SLOTS = 8  # a target with at most this many free slots gets all its sets as columns (2^8 = 256)
_EPSILON = 1e-9  # of a weight: smaller gains are round-off


@dataclass(frozen=True)
class Column:
    """A whole set of looks of one target."""

    target: int
    slots: tuple[int, ...]  # local, ascending; fixed looks included
    value: float  # expected-information value above no looks


@dataclass(frozen=True)
class Room:
    """What the looks of the other targets leave of each account, for filling up."""

    left_min: Floats  # (A,)
    allocation: Ints  # (K_i,)
    charge: Floats  # (K_i,)

    def fits(self, chosen: Sequence[int]) -> Bools:
        """(K_i,) True where one more slot still fits its account beside ``chosen``."""
        index = np.asarray(chosen, dtype=np.int64)
        used = np.bincount(self.allocation[index], self.charge[index], minlength=self.left_min.size)
        return np.asarray(self.charge <= (self.left_min - used)[self.allocation] + 1e-9)


class TargetPricer:
    """Prices one target. ``kept``: the local slots it may use (fixed looks are always in)."""

    def __init__(self, part: TargetPart, target: int, kept: Ints, spacing: Spacing | None = None) -> None:
        self.part, self.target = part, target
        self.spacing = spacing or Spacing.of(part)
        self.forced = tuple(int(k) for k in np.flatnonzero(part.forced))
        self.start = utilities_without_looks(part)
        self._values: dict[tuple[int, ...], float] = {}
        self._learn = [goal for goal in part.goals if isinstance(goal, LearnPart)]
        self._count = [goal for goal in part.goals if isinstance(goal, CountPart)]
        draws, size = part.rows.shape[0], part.prior_precision.shape[0]
        self._gradients = np.array([g.gradient for g in self._learn]).reshape(-1, draws, size)
        self._wanted = np.array([g.wanted for g in self._learn]).reshape(-1, draws)
        self._learn_weights = np.array([g.weight for g in self._learn])
        self._floor = float(weights(part) @ self.start)
        self.keep(kept)

    def keep(self, kept: Ints) -> None:
        """Choose the local slots that may be taken."""
        self.kept = np.setdiff1d(kept, self.forced)
        root = np.sqrt(self.part.chance[self.kept])[None, :, None, None]
        self._rows = compact(self.part.rows[:, self.kept]) * root
        self._usable = [goal.usable[:, self.kept] * self.part.chance[self.kept] for goal in self._count]

    def value(self, chosen: Sequence[int]) -> float:
        """Expected-information value of a set above no looks."""
        key = tuple(chosen)
        if key not in self._values:
            self._values[key] = value_of(self.part, expected_utilities(self.part, key), self.start)
        return self._values[key]

    def column(self, chosen: Sequence[int]) -> Column:
        """Return a set as a column."""
        key = tuple(sorted(int(k) for k in chosen))
        return Column(self.target, key, self.value(key))

    def values_after(self, chosen: Sequence[int], candidates: Ints) -> Floats:
        """Value of ``chosen`` plus each candidate alone, (n,); ``candidates`` number the kept slots."""
        index = np.asarray(chosen, dtype=np.int64)
        total = np.full(candidates.size, -self._floor)
        if self._learn and candidates.size:
            matrix = gathered(self.part.prior_precision, self.part.rows[:, index], self.part.chance[index])
            after = information_after(matrix, self._gradients, self._rows[:, candidates])
            reached = np.minimum(1.0, after / self._wanted[:, :, None]).mean(axis=1)
            total += self._learn_weights @ reached
        for goal, usable in zip(self._count, self._usable, strict=True):
            here = goal.usable[:, index] @ self.part.chance[index]
            counts = (here[:, None] + usable[:, candidates]) / goal.wanted
            total += goal.weight * np.minimum(1.0, counts).mean(axis=0)
        return total

    def grow(self, costs: Floats, chosen: Sequence[int] = (), room: Room | None = None) -> tuple[int, ...]:
        """Add slots by (gain - cost) / cost while one has a net gain. ``costs``: (K_i,)."""
        taken = tuple(sorted({*self.forced, *chosen}))
        soft = 0.05 * float(costs[self.kept].mean()) + 1e-12 if self.kept.size else 1.0
        while True:
            candidates = self._candidates(taken, room)
            if candidates.size == 0:
                return taken
            cost = costs[self.kept[candidates]]
            net = self.values_after(taken, candidates) - self.value(taken) - cost
            ratio = np.where(net > _EPSILON, net / (cost + soft), -np.inf)
            best = int(np.argmax(ratio))
            if not np.isfinite(ratio[best]):
                return taken
            taken = tuple(sorted((*taken, int(self.kept[candidates[best]]))))

    def improve(self, costs: Floats, chosen: Sequence[int], room: Room | None = None) -> tuple[int, ...]:
        """Add, drop and swap while the net gain rises."""
        taken = tuple(sorted(chosen))
        for _ in range(PASSES):
            before = taken
            taken = self._swap_all(costs, taken, room)
            taken = self.grow(costs, taken, room)
            if taken == before:
                break
        return taken

    def _swap_all(self, costs: Floats, taken: tuple[int, ...], room: Room | None) -> tuple[int, ...]:
        for look in [k for k in taken if not self.part.forced[k]]:
            rest = tuple(k for k in taken if k != look)
            best_net, best_set = self._net(costs, taken), taken
            if self.spacing.kept(rest) and self._net(costs, rest) > best_net + _EPSILON:
                best_net, best_set = self._net(costs, rest), rest
            candidates = self._candidates(rest, room, look)
            if candidates.size:
                added = costs[self.kept[candidates]]
                nets = self.values_after(rest, candidates) - added - costs[list(rest)].sum()
                top = int(np.argmax(nets))
                if nets[top] > best_net + _EPSILON:
                    best_set = tuple(sorted((*rest, int(self.kept[candidates[top]]))))
            taken = best_set
        return taken

    def _net(self, costs: Floats, chosen: tuple[int, ...]) -> float:
        return self.value(chosen) - float(costs[list(chosen)].sum())

    def _candidates(self, taken: tuple[int, ...], room: Room | None, without: int | None = None) -> Ints:
        allowed = self.spacing.may_join(taken)
        if without is not None:
            allowed[without] = False
            if not np.isinf(self.part.at_most_days) and not self.spacing.kept(taken):
                # the hole left by the dropped look is too long: only what closes it again will do
                allowed &= self._closes(taken)
        if room is not None:
            allowed = allowed & room.fits(taken)
        return np.flatnonzero(allowed[self.kept])

    def _closes(self, taken: tuple[int, ...]) -> Bools:
        found = np.zeros(self.part.slots.size, dtype=bool)
        for k in self.kept:
            found[k] = self.spacing.kept((*taken, int(k)))
        return found

    def sets_at(
        self, costs: Floats, rng: np.random.Generator, best: Sequence[int] | None, multipliers: Sequence[float]
    ) -> list[tuple[int, ...]]:
        """Sets found at the prices: one a multiplier of all costs, one with shaken costs, one from ``best``."""
        found = [self.improve(costs * m, self.grow(costs * m)) for m in multipliers]
        # settings of the trials: log-normal 0.15 on all prices, 5 % noise on each cost
        shaken = costs * np.exp(0.15 * rng.standard_normal()) * (1.0 + 0.05 * rng.standard_normal(costs.size))
        shaken = np.maximum(shaken, 0.0)
        found.append(self.improve(shaken, self.grow(shaken)))
        if best is not None:
            found.append(self.improve(costs, best))
        return found

    def every_set(self) -> list[tuple[int, ...]] | None:
        """All sets that keep the spacing, or None when the target has too many free slots to list them."""
        free = np.flatnonzero(~self.part.forced & ~np.any(self.spacing.clash[self.part.forced], axis=0))
        if free.size > COMPLETE_SLOTS:
            return None
        sets = []
        for pattern in range(2**free.size):
            chosen = tuple(sorted((*self.forced, *(int(k) for i, k in enumerate(free) if pattern >> i & 1))))
            if self.spacing.kept(chosen):
                sets.append(chosen)
        return sets


def compact(rows: Floats) -> Floats:
    """Leave out rows that are zero in every draw: (B, n, M, P) to (B, n, fewer, P)."""
    if rows.shape[1] == 0:
        return rows
    present = np.any(rows != 0.0, axis=(0, 3))  # (n, M)
    most = max(1, int(present.sum(axis=1).max()))
    order = np.argsort(~present, axis=1, kind="stable")[:, :most]
    return np.take_along_axis(rows, order[None, :, :, None], axis=2)
