"""The steps of one solve and what they have found so far; `solve` runs them and puts the answer together."""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np

from planner.records import Floats, Progress
from planner.schedule.best_possible import BestPossible, allocation_rows, best_possible
from planner.schedule.columns import ColumnPrices, Pool, price_columns, slot_costs
from planner.schedule.exact import ExactPricer
from planner.schedule.master import Master
from planner.schedule.nights import violated_windows
from planner.schedule.pricing import Room, TargetPricer
from planner.schedule.problem import Problem, Spacing
from planner.schedule.utility import total_weight, utilities_without_looks, weights

HEURISTIC_ROUNDS = 15
EXACT_ROUNDS = 8
CLOSED = 2e-3  # proof shortfall at which more proof is not worth its time
FLAT = 3e-4  # relative rise of the column programme over two rounds below which heuristic pricing ends
_FIRST_MULTIPLIERS = (0.6, 0.85, 1.0, 1.2, 1.6)  # of all prices in the first round
_NOTHING = 1e-6  # best possible below this share of all weights counts as nothing to gain (solver tolerances)
_KEEP = 0.3  # share of the time that proving leaves to the choice of the plan handed out
_NEAR = 3.0  # a target's part of the gap, as a multiple of the mean part; our choice
_KEPT_MOST = 80  # slots a target keeps for heuristic pricing
_KEPT_LEAST = 16


def shortfall(value: float, best: float) -> float:
    """How far a value is below the best possible, as a fraction; 0 when there is nothing to gain."""
    return max(0.0, 1.0 - value / best) if best > 1e-12 else 0.0


class Clock:
    """Stops work between steps, and remembers that it did."""

    def __init__(self, seconds: float, should_stop: Callable[[], bool] | None) -> None:
        self._seconds, self._end = seconds, time.monotonic() + seconds
        self._should_stop = should_stop
        self._asked = False
        self.stopped = False  # some step was cut; the plan says so

    def left(self) -> float:
        """Seconds left."""
        return self._end - time.monotonic()

    def over(self, keep: float = 0.0) -> bool:
        """True once a stop was asked for, or less than the share ``keep`` of the time is left."""
        self._asked = self._asked or (self._should_stop is not None and self._should_stop())
        over = self._asked or self.left() <= keep * self._seconds
        self.stopped = self.stopped or over
        return over


class Work:
    """The steps of one solve and what they have found so far."""

    def __init__(self, problem: Problem, seed: int, clock: Clock, progress: Progress) -> None:
        self.problem, self.seed, self.clock, self.progress = problem, seed, clock, progress
        self.rng = np.random.default_rng([seed, 11])
        self.notes: list[str] = []
        self.rounds = 0
        self.start = [utilities_without_looks(part) for part in problem.targets]
        self.bound = sum(float(weights(part) @ (1.0 - s)) for part, s in zip(problem.targets, self.start, strict=True))
        self.relaxed: BestPossible | None = None
        self.prices: ColumnPrices | None = None
        self.pool = Pool(problem)
        self.pricers = [TargetPricer(part, t, np.arange(0), Spacing.of(part)) for t, part in enumerate(problem.targets)]
        for pricer in self.pricers:
            self.pool.add(pricer.column(pricer.forced))
        self.master = Master(problem, self.pool, allocation_rows(problem))
        self.proof = self.plan = self.master.base()
        self.complete = [False] * len(problem.targets)
        self._exacts: dict[int, ExactPricer] = {}

    # -------------------------------------------------------------- the steps

    def run(self) -> None:
        """Bound, columns and the best plan by expected information, as far as the clock allows."""
        self.progress("best possible", 0.0)
        self.relaxed = best_possible(self.problem, self.clock.over, self.clock.left)
        self.bound = min(self.bound, self.relaxed.bound)
        self.rounds += self.relaxed.rounds
        self.master.rows.extend(self.relaxed.rows)
        if self.nothing_to_gain():
            return
        self._first_columns(self.relaxed)
        self._first_plan(self.relaxed)
        gained: list[float] = []
        for count in range(HEURISTIC_ROUNDS):
            self.progress("looks", count / HEURISTIC_ROUNDS)
            if self.clock.over(_KEEP) or not self._heuristic_round(first=count == 0):
                break
            gained.append(0.0 if self.prices is None else self.prices.value)
            if count >= 3 and gained[-1] - gained[-3] <= FLAT * abs(gained[-1]):
                break
        self._choose()
        self._fill_up()
        for count in range(EXACT_ROUNDS):
            self.progress("proof", count / EXACT_ROUNDS)
            if self.closed() or self.clock.over(_KEEP) or not self._exact_round():
                break
        self._choose()
        self._fill_up()

    def interrupted(self) -> None:
        """Take note that a person stopped the work."""
        self.clock.stopped = True
        self.notes.append("interrupted: the best plan so far")

    def nothing_to_gain(self) -> bool:
        """True when no plan can add anything to what is known."""
        return self.bound <= _NOTHING * max(total_weight(self.problem.targets), 1e-300)

    def closed(self) -> bool:
        """True when the best plan is as good as the bound."""
        return shortfall(self.value(self.proof), self.bound) <= CLOSED

    def value(self, choice: tuple[int, ...]) -> float:
        """Expected-information value of a choice above no looks."""
        return float(sum(self.pool.columns[c].value for c in choice))

    def _first_columns(self, relaxed: BestPossible) -> None:
        """Every set of small targets; for the others choose the slots worth pricing."""
        for t, (pricer, part) in enumerate(zip(self.pricers, self.problem.targets, strict=True)):
            sets = pricer.every_set()
            if sets is not None:
                self.complete[t] = True
                for chosen in sets:
                    self.pool.add(pricer.column(chosen))
                continue
            reduced, shares = relaxed.reduced[part.slots], relaxed.shares[part.slots]
            merit = np.where(shares > 1e-6, np.inf, reduced)
            order = np.argsort(-merit, kind="stable")
            near = merit[order] > -0.01 * max(float(weights(part).sum()), 1e-300)
            count = int(np.clip(near.sum(), _KEPT_LEAST, max(_KEPT_MOST, int((shares > 1e-6).sum()))))
            pricer.keep(np.sort(order[:count]))

    def _first_plan(self, relaxed: BestPossible) -> None:
        """A quick whole plan by the relaxation's prices, so that there is one whenever the clock stops."""
        rows = [*allocation_rows(self.problem), *relaxed.rows]
        costs = slot_costs(self.problem, rows, np.concatenate((relaxed.allocation_prices, relaxed.row_prices)))
        for pricer, part, whole in zip(self.pricers, self.problem.targets, self.complete, strict=True):
            if not whole:
                self.pool.add(pricer.column(pricer.grow(costs[part.slots])))
        net = self.pool.values() - self.column_costs(costs)
        self._offer(self.master.greedy(np.argsort(-net, kind="stable"), self.pool.values()))

    def column_costs(self, costs: Floats) -> Floats:
        """Price of each column, (C,), from the prices of slots, (K,)."""
        return np.array([costs[self.pool.slots(c)].sum() for c in range(len(self.pool))])

    def _offer(self, choice: tuple[int, ...]) -> None:
        """Keep a feasible choice when it is the best by expected information so far."""
        if self.value(choice) > self.value(self.proof):
            self.proof = self.plan = choice

    def _separate_shares(self, prices: ColumnPrices) -> int:
        shares = np.zeros(self.problem.size)
        for c in np.flatnonzero(prices.shares > 1e-7):
            shares[self.pool.slots(int(c))] += prices.shares[c]
        taken = np.flatnonzero(shares > 1e-7)
        known = {row.what for row in self.master.rows}
        fresh = [row for row in violated_windows(self.problem, taken, shares[taken], 0.01) if row.what not in known]
        self.master.rows.extend(fresh)
        return len(fresh)

    def price(self) -> ColumnPrices:
        """Prices over the present columns, with the night rows that their optimum breaks."""
        for _ in range(10):
            prices = price_columns(self.pool, self.master.rows)
            if self._separate_shares(prices) == 0:
                break
            prices = price_columns(self.pool, self.master.rows)
        self.prices = prices
        return prices

    def _heuristic_round(self, first: bool) -> bool:
        """One round of heuristic pricing; False when it found nothing that pays."""
        prices = self.price()
        costs = slot_costs(self.problem, self.master.rows, prices.row_prices)
        self.rounds += 1
        found = False
        for t, (pricer, part) in enumerate(zip(self.pricers, self.problem.targets, strict=True)):
            if self.complete[t]:
                continue
            if self.clock.over():
                return False
            mine = self.pool.of_target(t)
            best = self.pool.columns[int(mine[int(np.argmax(prices.shares[mine]))])].slots
            local = costs[part.slots]
            multipliers = _FIRST_MULTIPLIERS if first else (1.0,)
            for chosen in pricer.sets_at(local, self.rng, best, multipliers):
                net = pricer.value(chosen) - float(local[list(chosen)].sum())
                before = len(self.pool)
                self.pool.add(pricer.column(chosen))
                found |= len(self.pool) > before and net > prices.target_prices[t] + 1e-7
        return found

    def _choose(self) -> None:
        """Integer choice by expected information."""
        if len(self.pool) == len(self.problem.targets):
            return
        values = self.pool.values()
        prices = self.price()
        order = np.lexsort((-values, -prices.shares))
        self._offer(self.master.greedy(order, values))
        choice = self.master.best(values, self.proof, self.clock.left())
        self._offer(choice.columns)
        if all(self.complete) and not self.master.sequencer.undecided:
            self.bound = min(self.bound, choice.bound * (1.0 + 1e-9) + 1e-12)
        if choice.stopped:
            self.clock.stopped = True

    def _fill_up(self) -> None:
        """Improve one target at a time inside what the others leave, then choose again if that helped."""
        problem, before = self.problem, self.value(self.proof)
        for t, (pricer, part) in enumerate(zip(self.pricers, problem.targets, strict=True)):
            if self.complete[t] or self.clock.over(_KEEP / 2):
                continue
            others = self.master.slots([c for i, c in enumerate(self.proof) if i != t])
            used = np.bincount(problem.allocation[others], problem.charge[others], minlength=problem.limits.size)
            room = Room(problem.limits - used, problem.allocation[part.slots], problem.charge[part.slots])
            chosen = pricer.improve(np.zeros(part.slots.size), self.pool.columns[self.proof[t]].slots, room)
            number = self.pool.add(pricer.column(chosen))
            choice = (*self.proof[:t], number, *self.proof[t + 1 :])
            if self.master.feasible(choice):
                self._offer(choice)
        if self.value(self.proof) > before * (1.0 + 1e-4) and not self.clock.over():
            values = self.pool.values()
            self._offer(self.master.best(values, self.proof, self.clock.left()).columns)

    def _exact_round(self) -> bool:
        """Price every target exactly: new columns and a bound. False when nothing moved."""
        prices = self.price()
        costs = slot_costs(self.problem, self.master.rows, prices.row_prices)
        limits = np.array([row.limit for row in self.master.rows])
        total, moved = float(limits @ prices.row_prices), False
        values, column_costs = self.pool.values(), self.column_costs(costs)
        # a better plan is behind these prices by less than the gap in all; a target's own share is a few times less
        near = max(0.0, prices.value - self.value(self.proof)) * min(1.0, _NEAR / len(self.problem.targets))
        self.rounds += 1
        for t, part in enumerate(self.problem.targets):
            mine = self.pool.of_target(t)
            known = float(np.max(values[mine] - column_costs[mine]))
            if self.complete[t]:
                total += known
                continue
            if self.clock.over(_KEEP):
                return False
            found = self._exact(t).price(costs[part.slots], known, near, lambda: self.clock.over(_KEEP))
            total += found.bound
            for chosen in found.sets:
                column = self.pricers[t].column(chosen)
                self.pool.add(column)
                moved |= (
                    column.value - float(costs[part.slots[list(chosen)]].sum())
                    > prices.target_prices[t] + 1e-5 * prices.value
                )
        better = total * (1.0 + 1e-9) + 1e-9
        moved |= better < self.bound - 0.02 * (self.bound - self.value(self.proof))
        self.bound = min(self.bound, better)
        return moved

    def _exact(self, target: int) -> ExactPricer:
        if target not in self._exacts:
            lines = [] if self.relaxed is None else list(self.relaxed.tangents[target])
            self._exacts[target] = ExactPricer(self.pricers[target], lines)
        return self._exacts[target]
