"""Choosing one column a target: integer programmes over columns whose night rows enter when broken."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints
from planner.schedule.columns import Pool, add_floor, add_limits, add_master_rows
from planner.schedule.highs import INFEASIBLE, TIME_LIMIT, Model
from planner.schedule.nights import Sequencer, SharedRow, violated_windows
from planner.schedule.problem import Problem

NODES = 2000  # branch-and-bound nodes of one run: the effort; the clock is only a safety stop
GAP = 1e-4  # relative gap at which a run may end
SEPARATIONS = 60  # integer candidates looked at before the best repaired plan is taken
_BROKEN_MIN = 0.01


@dataclass(frozen=True)
class Choice:
    """One column a target that keeps every limit."""

    columns: tuple[int, ...]  # by target: column number
    value: float  # of the objective asked for
    bound: float  # no choice among these columns has more; inf when the run was cut before saying
    stopped: bool  # the clock ended it


class Master:
    """Integer choices over a pool. ``rows``: limits valid for every plan; ``together``: sets that cannot all be."""

    def __init__(self, problem: Problem, pool: Pool, rows: list[SharedRow]) -> None:
        self.problem, self.pool, self.rows = problem, pool, rows
        self.together: list[SharedRow] = []
        self.sequencer = Sequencer(problem)

    def base(self) -> tuple[int, ...]:
        """The choice with no look but the fixed ones: the first column of each target."""
        owners = self.pool.owners()
        return tuple(int(np.argmax(owners == t)) for t in range(len(self.problem.targets)))

    def slots(self, choice: Sequence[int]) -> Ints:
        """Global slots of a choice, ascending."""
        parts = [self.pool.slots(c) for c in choice]
        return np.sort(np.concatenate(parts)) if parts else np.empty(0, dtype=np.int64)

    def within_accounts(self, choice: Sequence[int]) -> bool:
        """True when the choice keeps every account, to a millionth of a minute."""
        taken = self.slots(choice)
        limits = self.problem.limits
        used = np.bincount(self.problem.allocation[taken], self.problem.charge[taken], minlength=limits.size)
        return bool(np.all(used <= limits + 1e-6))

    def feasible(self, choice: Sequence[int]) -> bool:
        """True when the choice keeps every account and every night can be sequenced."""
        return self.within_accounts(choice) and not self.sequencer.fit(self.slots(choice)).failing

    def separate(self, choice: Sequence[int]) -> list[SharedRow]:
        """Return rows that the choice breaks and the model does not hold yet (window rows first)."""
        taken = self.slots(choice)
        known = {row.what for row in self.rows}
        windows = violated_windows(self.problem, taken, np.ones(taken.size), _BROKEN_MIN)
        windows = [row for row in windows if row.what not in known]
        if windows:
            self.rows.extend(windows)
            return windows
        fit = self.sequencer.fit(taken)
        fresh = [
            SharedRow(
                np.array(sorted(group), dtype=np.int64), np.ones(len(group)), len(group) - 1.0, ("together", *group)
            )
            for group in fit.failing
        ]
        self.together.extend(fresh)
        return fresh

    def repaired(self, choice: Sequence[int], values: Floats) -> tuple[int, ...]:
        """Put targets back to their fixed looks, the least valuable first, until every limit is kept."""
        fixed = list(choice)
        base = self.base()
        while not self.within_accounts(fixed):
            fixed[self._cheapest(fixed, base, values, range(len(fixed)))] = -1
            fixed = [b if c < 0 else c for c, b in zip(fixed, base, strict=True)]
        while failing := self.sequencer.fit(self.slots(fixed)).failing:
            targets = sorted({int(self.problem.owner[k]) for group in failing[:1] for k in group})
            worst = self._cheapest(fixed, base, values, targets)
            fixed[worst] = base[worst]
        return tuple(fixed)

    def _cheapest(
        self, choice: Sequence[int], base: Sequence[int], values: Floats, among: Sequence[int] | range
    ) -> int:
        free = [t for t in among if choice[t] != base[t]]
        if not free:
            raise PlanningError("fixed looks alone break a limit; this should have been seen before")
        return min(free, key=lambda t: (values[choice[t]] - values[base[t]], t))

    def greedy(self, order: Ints, values: Floats) -> tuple[int, ...]:
        """Take columns in the given order while the rows hold, then repair the nights."""
        rows = [*self.rows, *self.together]
        use = self.pool.use(rows)
        choice = list(self.base())
        left = np.array([row.limit for row in rows]) - use[:, choice].sum(axis=1)
        done: set[int] = set()
        for c in order:
            target = self.pool.columns[int(c)].target
            more = use[:, c] - use[:, choice[target]]
            if target not in done and np.all((more <= left + 1e-7) | (more <= 0.0)):
                left -= more
                choice[target] = int(c)
                done.add(target)
        return self.repaired(choice, values)

    def best(
        self,
        values: Floats,
        start: Sequence[int],
        seconds_left: float,
        *,
        allowed: Ints | None = None,
        floor: tuple[Floats, float] | None = None,
    ) -> Choice:
        """Return the best choice by ``values`` (C,), never worse than ``start`` (a feasible choice).

        ``allowed``: column numbers that may be used (all when left out). ``floor``: (values, least sum) that the
        choice must reach by another measure.
        """
        import time

        begin = time.monotonic()
        index = np.arange(len(self.pool)) if allowed is None else np.unique(np.concatenate((allowed, start)))
        model = self._model(values, index, floor)
        best, best_value = tuple(start), float(values[list(start)].sum())
        bound, stopped = np.inf, False
        for _ in range(SEPARATIONS):
            model.limit(seconds=seconds_left - (time.monotonic() - begin), nodes=NODES, gap=GAP)
            model.start_from(np.isin(index, best).astype(float))
            status = model.run()
            stopped = status == TIME_LIMIT
            if status == INFEASIBLE or not model.has_solution:
                break
            bound = min(bound, -model.dual_bound)
            choice = self._read(model, index)
            broken = self.separate(choice)
            if not broken and self.within_accounts(choice):
                value = float(values[list(choice)].sum())
                if value > best_value:
                    best, best_value = choice, value
                break
            mended = self.repaired(choice, values)
            value = float(values[list(mended)].sum())
            if value > best_value and (floor is None or floor[0][list(mended)].sum() >= floor[1]):
                best, best_value = mended, value
            if stopped or not broken:
                break
            add_limits(model, self.pool.use(broken)[:, index], broken)
        return Choice(best, best_value, max(bound, best_value), stopped)

    def _model(self, values: Floats, index: Ints, floor: tuple[Floats, float] | None) -> Model:
        model = Model(-values[index], np.zeros(index.size), np.ones(index.size), integer=True)
        add_master_rows(model, self.pool, [*self.rows, *self.together], index)
        if floor is not None:
            add_floor(model, floor, index)
        return model

    def _read(self, model: Model, index: Ints) -> tuple[int, ...]:
        z = model.values()
        owners = self.pool.owners()[index]
        return tuple(
            int(index[group[int(np.argmax(z[group]))]])
            for group in (np.flatnonzero(owners == t) for t in range(len(self.problem.targets)))
        )
