"""From a problem to a plan with a proven bound.

Prices from the slot programme; columns by heuristic pricing; an integer choice over columns; exact pricing, which
tightens the bound; then, among plans within 1 % of the best by expected information, the one that realises most.
Effort is counted in rounds, nodes and deterministic time. The clock only stops between steps, and the plan then
says so.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints, Outcome, Progress, lock, silent
from planner.schedule.columns import slot_costs
from planner.schedule.everything import everything
from planner.schedule.nights import Sequencer
from planner.schedule.problem import Problem
from planner.schedule.realised import Realised
from planner.schedule.steps import Clock, Work, shortfall
from planner.schedule.utility import expected_utilities, value_of

PROVEN_SHORTFALL = 0.003  # "proven best": the best plan found is within 0.3 % of the bound
ALL_MET = "every goal is already met"
NOTHING_HELPS = "nothing that can be scheduled helps"


@dataclass(frozen=True)
class TargetFacts:
    """What decides whether a target is in the plan: material for reasons."""

    name: str
    slots: int  # possible looks
    looks: int  # taken
    value: float  # of its looks in the plan, expected information
    everything: float  # value of all its slots together, limits ignored
    best_net: float  # largest value less price among the sets found; not above 0: too dear at these prices
    best_cost: float  # price of that set (of the best single set found when the target has none)
    cheapest_min: float  # minutes charged by its cheapest slot; nan without slots


@dataclass(frozen=True)
class Solution:
    """A plan over slots with its bound."""

    slots: Ints  # (n,) global slots chosen, in order of start
    start_mjd: Floats  # (n,)
    value: float  # expected information, above no looks
    value_realised: float
    proof_value: float  # of the best plan by expected information
    best_possible: float
    outcome: Outcome
    rounds: int
    notes: tuple[str, ...]
    utilities: tuple[tuple[float, ...], ...]  # by target and goal, expected information
    utilities_realised: tuple[tuple[float, ...], ...]
    allocation_prices: Floats  # (A,) value one more minute would add, from the relaxation
    reduced: Floats  # (K,) net value of each slot at those prices, from the relaxation
    facts: tuple[TargetFacts, ...]

    def __post_init__(self) -> None:
        lock(self)

    @property
    def shortfall(self) -> float:
        """How far the plan is below the best possible, as a fraction."""
        return shortfall(self.value, self.best_possible)

    @property
    def proof_shortfall(self) -> float:
        """The same for the plan that is best by expected information."""
        return shortfall(self.proof_value, self.best_possible)


def solve(
    problem: Problem,
    *,
    seed: int,
    seconds: float = 60.0,
    progress: Progress = silent,
    should_stop: Callable[[], bool] | None = None,
) -> Solution:
    """Plan: choose slots and starts.

    Deterministic for one seed unless ``seconds`` or ``should_stop`` cuts it, which the outcome then says.
    Raises PlanningError when fixed looks overlap or overdraw an account, or when a solver ends in no usable state.
    """
    check_fixed_looks(problem)
    work = Work(problem, seed, Clock(seconds, should_stop), progress)
    judge = Realised(work)
    try:
        work.run()
        if not work.nothing_to_gain():
            progress("realised", 0.0)
            judge.choose()
            progress("realised", 1.0)
    except KeyboardInterrupt:
        work.interrupted()
    return _answer(work, judge)


def check_fixed_looks(problem: Problem) -> None:
    """Raise PlanningError naming the fixed looks that overlap on a telescope, or that overdraw an account."""
    fixed = np.concatenate([part.slots[part.forced] for part in problem.targets] or [np.empty(0, dtype=np.int64)])
    fit = Sequencer(problem).fit(int(k) for k in fixed)
    if fit.failing:
        names = " and ".join(problem.name(k) for k in fit.failing[0])
        raise PlanningError(f"fixed looks cannot all be done by one telescope: {names}; move or drop one of them")
    for a, limit in enumerate(problem.limits):
        mine = fixed[problem.allocation[fixed] == a]
        used = float(problem.charge[mine].sum())
        if used > limit + 1e-6:
            names = " and ".join(problem.name(int(k)) for k in mine)
            raise PlanningError(
                f"fixed looks need {used:g} min of allocation {a}, which has {limit:g} min: {names}; drop one of "
                "them or raise the allocation"
            )


def _answer(work: Work, judge: Realised) -> Solution:
    """Put the answer together and check it against its bound."""
    taken, problem = work.master.slots(work.plan), work.problem
    fit = work.master.sequencer.fit(int(k) for k in taken)
    if fit.failing or not work.master.within_accounts(work.plan):
        raise PlanningError(f"the plan found breaks a limit (looks {fit.failing}); report this problem")
    starts = np.array([fit.start_mjd[int(k)] for k in taken])
    order = np.argsort(starts, kind="stable")
    value, proof = work.value(work.plan), work.value(work.proof)
    if max(value, proof) > work.bound * (1.0 + 1e-6) + 1e-9:
        raise PlanningError(
            f"plan value {max(value, proof):.9g} is above the best possible {work.bound:.9g}; report this problem"
        )
    bound = max(value, proof, 0.0 if work.nothing_to_gain() else work.bound)
    sets = [work.pool.columns[c].slots for c in work.plan]
    parts, relaxed = problem.targets, work.relaxed
    outcome = _outcome(work, proof, bound)
    return Solution(
        slots=taken[order],
        start_mjd=starts[order],
        value=value,
        value_realised=judge.total(work.plan),
        proof_value=proof,
        best_possible=bound,
        outcome=outcome,
        rounds=work.rounds,
        notes=tuple(work.notes),
        utilities=tuple(_tuple(expected_utilities(p, s)) for p, s in zip(parts, sets, strict=True)),
        utilities_realised=tuple(_tuple(judge.utilities(c)) for c in work.plan),
        allocation_prices=relaxed.allocation_prices if relaxed else np.zeros(problem.limits.size),
        reduced=relaxed.reduced if relaxed else np.zeros(problem.size),
        facts=_facts(work),
    )


def _tuple(values: Floats) -> tuple[float, ...]:
    return tuple(float(v) for v in values)


def _outcome(work: Work, proof: float, bound: float) -> Outcome:
    if work.nothing_to_gain():
        met = all(bool(np.all(start >= 1.0 - 1e-9)) for start in work.start)
        work.notes.append(ALL_MET if met else NOTHING_HELPS)
        return Outcome.PROVEN if met else Outcome.IMPOSSIBLE
    if work.clock.stopped:
        if not work.notes:
            work.notes.append("stopped by the clock: the best plan so far")
        return Outcome.STOPPED
    return Outcome.PROVEN if shortfall(proof, bound) <= PROVEN_SHORTFALL else Outcome.GOOD


def _facts(work: Work) -> tuple[TargetFacts, ...]:
    rows, pool = work.master.rows, work.pool
    prices = np.zeros(len(rows))
    if work.prices is not None:
        prices[: work.prices.row_prices.size] = work.prices.row_prices
    costs = work.column_costs(slot_costs(work.problem, rows, prices))
    values, owners = pool.values(), pool.owners()
    looks = np.array([len(column.slots) for column in pool.columns], dtype=np.int64)
    facts = []
    for t, part in enumerate(work.problem.targets):
        mine = np.flatnonzero((owners == t) & (looks > 0))
        top = int(mine[int(np.argmax(values[mine] - costs[mine]))]) if mine.size else -1
        facts.append(
            TargetFacts(
                name=part.name,
                slots=int(part.slots.size),
                looks=int(looks[work.plan[t]]),
                value=float(values[work.plan[t]]),
                everything=value_of(part, expected_utilities(part, np.arange(part.slots.size)), work.start[t]),
                best_net=float(values[top] - costs[top]) if top >= 0 else 0.0,
                best_cost=float(costs[top]) if top >= 0 else 0.0,
                cheapest_min=float(work.problem.charge[part.slots].min()) if part.slots.size else float("nan"),
            )
        )
    return tuple(facts)


__all__ = ["Solution", "TargetFacts", "check_fixed_looks", "everything", "solve"]
