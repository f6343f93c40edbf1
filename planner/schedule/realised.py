"""The plan handed out: among plans close to the best by expected information, the one that realises most.

Expected information stops paying once a goal is met on average; a plan that must also survive lost nights wants
more looks than that. Sets for it are found by pricing with every chance cut down (as if more looks were lost than
will be) and by growing them by their realised gain, and judged by their expected realised value.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from planner.records import Floats, Ints
from planner.schedule.columns import price_columns, slot_costs
from planner.schedule.pricing import Room, TargetPricer
from planner.schedule.realised_pricing import RealisedPricer
from planner.schedule.steps import Work
from planner.schedule.utility import draw_luck, realised_utilities, value_of, weights

GIVES_UP = 0.01  # share of the proof plan's value that realised value may cost
_CAREFUL = (0.75, 0.5)  # factors on every chance under which further sets are sought; our choice
_ROUNDS = 2
_LEAST_GAIN = 5e-4  # of a target's weight that each further look must add; a look is work for people; our choice


class Realised:
    """Realised values of the columns of a solve, and the choice by them."""

    def __init__(self, work: Work) -> None:
        self.work, self.pool = work, work.pool
        self._luck: dict[int, Floats] = {}
        self._utilities: dict[int, Floats] = {}
        self._careful: dict[tuple[int, float], TargetPricer] = {}
        self._honest_pricers: dict[int, RealisedPricer] = {}

    def utilities(self, number: int) -> Floats:
        """Expected realised utility of each goal with the looks of a column, (G,)."""
        if number not in self._utilities:
            column = self.pool.columns[number]
            part = self.work.problem.targets[column.target]
            self._utilities[number] = realised_utilities(part, column.slots, self._lucky(column.target))
        return self._utilities[number]

    def value(self, number: int) -> float:
        """Expected realised value of a column above no looks."""
        column = self.pool.columns[number]
        part = self.work.problem.targets[column.target]
        return value_of(part, self.utilities(number), self.work.start[column.target])

    def total(self, choice: Sequence[int]) -> float:
        """Expected realised value of a choice."""
        return float(sum(self.value(c) for c in choice))

    def choose(self) -> None:
        """Set the plan handed out; nothing changes when the clock is over or there is nothing to choose."""
        work = self.work
        if work.clock.over() or len(self.pool) == len(work.problem.targets):
            return
        least = work.value(work.proof) * (1.0 - GIVES_UP)
        costs = slot_costs(work.problem, work.master.rows, work.price().row_prices)
        for _ in range(_ROUNDS):
            self._more_columns(costs)
            judged = self._judged(least)
            if judged is None:
                return
            values, allowed = judged
            floor = (self.pool.values(), least)
            prices = price_columns(self.pool, work.master.rows, values, allowed, floor)
            costs = slot_costs(work.problem, work.master.rows, prices.row_prices)
        self._best(least)
        if self._fill_up(least):
            self._best(least)

    def _best(self, least: float) -> None:
        work, judged = self.work, self._judged(least)
        if judged is None:
            return
        values, allowed = judged
        floor = (self.pool.values(), least)
        choice = work.master.best(values, work.plan, work.clock.left(), allowed=allowed, floor=floor)
        if choice.stopped:
            work.clock.stopped = True
        work.plan = choice.columns

    def _judged(self, least: float) -> tuple[Floats, Ints] | None:
        """Realised values (C,) of the columns that a plan worth ``least`` could hold, and their numbers."""
        work = self.work
        prices = work.price()
        costs = work.column_costs(slot_costs(work.problem, work.master.rows, prices.row_prices))
        behind = prices.target_prices[self.pool.owners()] - (self.pool.values() - costs)
        # a plan that reaches ``least`` cannot hold a column further behind than the whole distance
        allowed = np.flatnonzero(behind <= prices.value - least + 1e-7)
        allowed = np.unique(np.concatenate((allowed, work.proof, work.plan)))
        values = np.zeros(len(self.pool))
        for c in allowed:
            if work.clock.over():
                return None
            values[c] = self.value(int(c))
        return values, allowed

    def _pricer(self, target: int, factor: float) -> TargetPricer:
        """A pricer that takes every chance for less than it is."""
        key = (target, factor)
        if key not in self._careful:
            usual = self.work.pricers[target]
            part = replace(usual.part, chance=usual.part.chance * factor)
            self._careful[key] = TargetPricer(part, target, usual.kept, usual.spacing)
        return self._careful[key]

    def _honest(self, target: int) -> RealisedPricer:
        """A pricer that counts what a set is expected to realise."""
        if target not in self._honest_pricers:
            usual = self.work.pricers[target]
            self._honest_pricers[target] = RealisedPricer(usual, self._lucky(target))
        return self._honest_pricers[target]

    def _lucky(self, target: int) -> Floats:
        if target not in self._luck:
            slots = self.work.problem.targets[target].slots.size
            self._luck[target] = draw_luck(self.work.seed, target, slots)
        return self._luck[target]

    def _more_columns(self, costs: Floats) -> None:
        work = self.work
        for t, part in enumerate(work.problem.targets):
            if work.complete[t] or work.clock.over():
                continue
            local = costs[part.slots] + self._least_gain(t)
            for factor in _CAREFUL:
                pricer = self._pricer(t, factor)
                for start in (pricer.grow(local), self.pool.columns[work.plan[t]].slots):
                    self.pool.add(work.pricers[t].column(pricer.improve(local, start)))
            grown = self._honest(t).grow(local, self.pool.columns[work.plan[t]].slots)
            self.pool.add(work.pricers[t].column(grown))

    def _least_gain(self, target: int) -> float:
        return _LEAST_GAIN * float(weights(self.work.problem.targets[target]).sum())

    def _fill_up(self, least: float) -> bool:
        """Spend what is left of the accounts, one target after the other; True when it realises more."""
        work, problem, helped = self.work, self.work.problem, False
        for t, part in enumerate(problem.targets):
            if work.complete[t] or work.clock.over():
                continue
            others = work.master.slots([c for i, c in enumerate(work.plan) if i != t])
            used = np.bincount(problem.allocation[others], problem.charge[others], minlength=problem.limits.size)
            room = Room(problem.limits - used, problem.allocation[part.slots], problem.charge[part.slots])
            free = np.full(part.slots.size, self._least_gain(t))
            for pricer in (*(self._pricer(t, factor) for factor in _CAREFUL), self._honest(t)):
                chosen = pricer.grow(free, self.pool.columns[work.plan[t]].slots, room)
                number = self.pool.add(work.pricers[t].column(chosen))
                choice = (*work.plan[:t], number, *work.plan[t + 1 :])
                more = len(chosen) - len(self.pool.columns[work.plan[t]].slots)
                needed = self.value(work.plan[t]) + more * self._least_gain(t)
                better = more > 0 and work.value(choice) >= least and self.value(number) >= needed
                if better and work.master.feasible(choice):
                    work.plan, helped = choice, True
        return helped
