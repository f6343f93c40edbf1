"""An upper bound on any plan, with prices: a linear programme over slots.

Maximise the weighted utilities over shares of slots in [0, 1]. Utilities are held down by tangents, added in
rounds; the windows of the smallest spacing and the limits of each telescope's night enter only when broken. A plan
keeps every row at every round, so whatever the round, the optimum is above every plan.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints, lock
from planner.schedule.highs import OPTIMAL, TIME_LIMIT, Model
from planner.schedule.nights import SharedRow, violated_windows
from planner.schedule.problem import Problem, Spacing, TargetPart
from planner.schedule.tangents import Tangent, tangents_at
from planner.schedule.utility import utilities_without_looks, weights

ROUNDS = 40  # 6-15 are used in practice
_LOOSE = 2e-4  # utility above the truth that calls for another tangent
_CLOSE = 2e-4  # relative distance of the bound from the concave value at its point at which rounds end
_NIGHT_MIN = 0.01  # broken minutes that call for a row
_MARGIN = 1e-7  # added to the bound, relative: the solver's own tolerance


@dataclass(frozen=True)
class BestPossible:
    """What the slot programme says."""

    bound: float  # on any plan's expected-information value above no looks
    shares: Floats  # (K,) of the last optimum
    allocation_prices: Floats  # (A,) value a minute
    reduced: Floats  # (K,) value gained by forcing in one more of a slot, net of prices; about 0 for those taken
    rows: tuple[SharedRow, ...]  # night rows in the model
    row_prices: Floats  # (rows,) value a unit
    tangents: tuple[tuple[Tangent, ...], ...]  # by target
    rounds: int
    finished: bool  # False: the clock stopped the rounds; the bound still holds

    def __post_init__(self) -> None:
        lock(self)


def allocation_rows(problem: Problem) -> list[SharedRow]:
    """Return one row an account: minutes charged <= minutes granted."""
    rows = []
    for a in range(problem.limits.size):
        slots = np.flatnonzero(problem.allocation == a)
        rows.append(SharedRow(slots, problem.charge[slots], float(problem.limits[a]), ("allocation", a)))
    return rows


def blocked_slots(problem: Problem, spacings: list[Spacing]) -> Ints:
    """Return the global slots that clash with a fixed look of their target or do not fit their own window."""
    out = []
    for part, spacing in zip(problem.targets, spacings, strict=True):
        clash = np.any(spacing.clash[part.forced], axis=0) & ~part.forced
        room = (problem.latest_mjd - problem.earliest_mjd)[part.slots] * 1440.0
        clash |= room < problem.minutes[part.slots] - 1e-3
        out.append(part.slots[clash & ~part.forced])
    return np.concatenate(out) if out else np.empty(0, dtype=np.int64)


class SlotProgramme:
    """The linear programme, kept warm while rows are added."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.spacings = [Spacing.of(part) for part in problem.targets]
        self.start = [utilities_without_looks(part) for part in problem.targets]
        self.first_goal = np.concatenate(([0], np.cumsum([len(part.goals) for part in problem.targets])))
        slots, goals = problem.size, int(self.first_goal[-1])
        all_weights = np.concatenate([weights(part) for part in problem.targets] or [np.empty(0)])
        self.offset = -float(sum(weights(p) @ s for p, s in zip(problem.targets, self.start, strict=True)))
        cost = np.concatenate((np.zeros(slots), -all_weights))
        lower, upper = np.zeros(slots + goals), np.ones(slots + goals)
        upper[blocked_slots(problem, self.spacings)] = 0.0
        for part in problem.targets:
            lower[part.slots[part.forced]] = 1.0
        self.model = Model(cost, lower, upper)
        self.shared: list[SharedRow] = []
        self._shared_at: list[int] = []
        self._row_count = 0
        self._names: set[tuple[object, ...]] = set()
        self.tangents: list[list[Tangent]] = [[] for _ in problem.targets]
        self.add_shared(allocation_rows(problem))
        for i, part in enumerate(problem.targets):
            if part.goals:
                for point in _first_points(part):
                    self._add_tangents(i, [line for _, line in tangents_at(part, *point)])

    def add_shared(self, rows: list[SharedRow]) -> int:
        """Add rows that are not there yet; return how many were."""
        fresh = [row for row in rows if row.what not in self._names]
        if fresh:
            self.model.add_rows(
                np.full(len(fresh), -np.inf),
                np.array([row.limit / 60.0 for row in fresh]),  # hours: coefficients near 1
                [row.slots for row in fresh],
                [row.part / 60.0 for row in fresh],
            )
            self._names.update(row.what for row in fresh)
            self.shared.extend(fresh)
            self._shared_at.extend(range(self._row_count, self._row_count + len(fresh)))
            self._row_count += len(fresh)
        return len(fresh)

    def _add_tangents(self, target: int, lines: list[Tangent]) -> None:
        part = self.problem.targets[target]
        index, value = [], []
        for line in lines:
            touched = np.flatnonzero(line.coefficients > 1e-9)
            goal = self.problem.size + int(self.first_goal[target]) + line.goal
            index.append(np.concatenate((part.slots[touched], [goal])))
            value.append(np.concatenate((-line.coefficients[touched], [1.0])))
        # coefficients left out (below 1e-9 each) are paid for in the constant, so the line stays above the truth
        high = np.array([line.constant + line.coefficients[line.coefficients <= 1e-9].sum() for line in lines])
        self.model.add_rows(np.full(len(lines), -np.inf), high, index, value)
        self._row_count += len(lines)
        self.tangents[target].extend(lines)

    def _cut(self, x: Floats, u: Floats) -> tuple[int, float]:
        """Add what the point breaks; return the number of rows added and the concave value at the point."""
        added, true_value = 0, self.offset
        for i, part in enumerate(self.problem.targets):
            shares = x[part.slots]
            index = np.flatnonzero(shares > 1e-7)
            lines = []
            for truth, line in tangents_at(part, index, shares[index]) if part.goals else []:
                true_value += part.goals[line.goal].weight * truth
                if u[int(self.first_goal[i]) + line.goal] > truth + _LOOSE:
                    lines.append(line)
            if lines:
                self._add_tangents(i, lines)
            added += len(lines) + self._add_spacing(i, shares)
        taken = np.flatnonzero(x > 1e-7)
        added += self.add_shared(violated_windows(self.problem, taken, x[taken], _NIGHT_MIN))
        return added, true_value

    def _add_spacing(self, target: int, shares: Floats) -> int:
        part = self.problem.targets[target]
        index = [part.slots[window] for window in broken_spacing(part, shares)]
        self.model.add_rows(np.full(len(index), -np.inf), np.ones(len(index)), index, [np.ones(w.size) for w in index])
        self._row_count += len(index)
        return len(index)

    def solve(self, should_stop: Callable[[], bool], seconds_left: Callable[[], float]) -> BestPossible:
        """Run the rounds; the first always finishes, later ones may be cut by the clock."""
        best: BestPossible | None = None
        for count in range(1, ROUNDS + 1):
            if best is not None and should_stop():
                return _unfinished(best)
            if best is not None:
                self.model.limit(seconds=seconds_left())
            status = self.model.run()
            if status == TIME_LIMIT and best is not None:
                return _unfinished(best)
            if status != OPTIMAL:
                raise PlanningError(f"the bound's linear programme ended as {status!r}; fixed looks may break a limit")
            best = self._read(count, best)
            values = self.model.values()
            added, truth = self._cut(values[: self.problem.size], values[self.problem.size :])
            if added == 0 or best.bound - truth <= _CLOSE * max(abs(best.bound), 1e-12):
                break
        if best is None:
            raise PlanningError("no round of the bound was run; report this problem")
        return best

    def _read(self, count: int, before: BestPossible | None) -> BestPossible:
        size = self.problem.size
        bound = self.offset - self.model.objective
        bound += _MARGIN * max(1.0, abs(bound))
        if before is not None:
            bound = min(bound, before.bound)
        prices = np.maximum(0.0, -self.model.row_prices()[self._shared_at]) / 60.0
        accounts = self.problem.limits.size
        return BestPossible(
            bound=max(0.0, bound),
            shares=np.clip(self.model.values()[:size], 0.0, 1.0),
            allocation_prices=prices[:accounts],
            reduced=-self.model.reduced_costs()[:size],
            rows=tuple(self.shared[accounts:]),
            row_prices=prices[accounts:],
            tangents=tuple(tuple(lines) for lines in self.tangents),
            rounds=count,
            finished=True,
        )


def best_possible(
    problem: Problem,
    should_stop: Callable[[], bool] = lambda: False,
    seconds_left: Callable[[], float] = lambda: 1e6,
) -> BestPossible:
    """Return the bound on any plan, with prices and reduced costs."""
    return SlotProgramme(problem).solve(should_stop, seconds_left)


def broken_spacing(part: TargetPart, shares: Floats) -> list[Ints]:
    """Return windows of slots no two of which may be taken together, where the shares sum to more than 1.

    Slots stand in order of time, so the slots within the smallest spacing after any slot exclude one another;
    fixed looks are left out (what clashes with them is forbidden already).
    """
    free = np.flatnonzero(~part.forced)
    if free.size == 0:
        return []
    moments = part.middle_mjd[free]
    ends = np.searchsorted(moments, moments + part.at_least_days - 1e-9, side="left")
    total = np.concatenate(([0.0], np.cumsum(shares[free])))
    over = total[ends] - total[np.arange(free.size)] > 1.0 + 1e-6
    largest = np.concatenate(([True], ends[1:] > ends[:-1]))  # others lie inside the window before them
    return [free[i : ends[i]] for i in np.flatnonzero(over & largest)]


def _first_points(part: TargetPart) -> list[tuple[Ints, Floats]]:
    """No look, and an even handful of slots."""
    handful = np.unique(np.linspace(0, part.slots.size - 1, num=min(6, part.slots.size)).astype(np.int64))
    return [(np.empty(0, dtype=np.int64), np.empty(0)), (handful, np.ones(handful.size))]


def _unfinished(best: BestPossible) -> BestPossible:
    from dataclasses import replace

    return replace(best, finished=False)
