"""Exact pricing of one target, and the bound of the slot programme, against plain answers."""

from __future__ import annotations

from dataclasses import replace
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from invented_problems import invented_problem

import planner.schedule.exact as module
from planner.schedule.best_possible import best_possible
from planner.schedule.exact import ExactPricer
from planner.schedule.pricing import TargetPricer
from planner.schedule.problem import TargetPart
from planner.schedule.tangents import tangents_at
from planner.schedule.utility import expected_utilities, utilities_without_looks, value_of

SOLVER = 1e-6  # value units: tolerances of the linear programmes


def target(seed: int) -> TargetPart:
    """At most 10 slots, some fixed, goals that about half of them reach."""
    part = invented_problem(
        seed, targets=2, nights=5, setups=2, chance_of_slot=0.9, at_least_days=0.4, tell=0.4
    ).targets[1]
    rng = np.random.default_rng(seed)
    return replace(part, forced=(rng.random(part.slots.size) < 0.15) & (np.arange(part.slots.size) < 2))


def best_by_trying_everything(pricer: TargetPricer, costs: np.ndarray) -> float:
    part, best = pricer.part, -np.inf
    for pattern in product([0, 1], repeat=part.slots.size):
        chosen = [k for k, taken in enumerate(pattern) if taken]
        if all(k in chosen for k in np.flatnonzero(part.forced)) and pricer.spacing.kept(chosen):
            best = max(best, pricer.value(chosen) - float(costs[chosen].sum()))
    return best


@pytest.mark.parametrize("nodes", [1, 3, 500])
@pytest.mark.parametrize("seed", range(16))
def test_bound_holds_however_few_nodes_and_is_reached_with_enough(
    seed: int, nodes: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(module, "NODES", nodes)
    part = target(seed)
    assert part.slots.size <= 10
    pricer = TargetPricer(part, 1, np.arange(part.slots.size))
    costs = np.random.default_rng(seed).uniform(0.05, 0.3, size=part.slots.size)
    exact = best_by_trying_everything(pricer, costs)
    alone = pricer.value(pricer.forced) - float(costs[list(pricer.forced)].sum())
    found = ExactPricer(pricer, []).price(costs, alone)
    assert found.bound >= exact - SOLVER
    nets = [pricer.value(s) - float(costs[list(s)].sum()) for s in found.sets]
    assert max([alone, *nets]) <= exact + SOLVER
    if nodes == 500:
        assert found.bound == pytest.approx(exact, abs=1e-4)  # branching ends at tangents loose by 1e-5 a goal
        assert max([alone, *nets]) == pytest.approx(exact, abs=1e-4)


@pytest.mark.parametrize("seed", range(6))
def test_heuristic_pricing_is_close_to_exact_and_keeps_the_spacing(seed: int) -> None:
    part = target(seed)
    pricer = TargetPricer(part, 1, np.arange(part.slots.size))
    costs = np.random.default_rng(seed).uniform(0.05, 0.3, size=part.slots.size)
    exact = best_by_trying_everything(pricer, costs)
    sets = pricer.sets_at(costs, np.random.default_rng(1), None, (0.6, 1.0, 1.6))
    assert all(pricer.spacing.kept(s) for s in sets)
    assert all(k in s for s in sets for k in np.flatnonzero(part.forced))
    best = max(pricer.value(s) - float(costs[list(s)].sum()) for s in sets)
    assert best <= exact + 1e-12
    assert best >= exact - 0.05 * float(sum(g.weight for g in part.goals))


@given(st.integers(0, 1000))
@settings(max_examples=20, deadline=None)
def test_tangents_lie_above_every_set_and_touch_at_their_point(seed: int) -> None:
    part = target(seed)
    rng = np.random.default_rng(seed)
    index = np.flatnonzero(rng.random(part.slots.size) < 0.5)
    lines = tangents_at(part, index, rng.random(index.size))
    for _ in range(10):
        taken = (rng.random(part.slots.size) < 0.5) | part.forced
        truth = expected_utilities(part, np.flatnonzero(taken))
        for _, line in lines:
            assert line.constant + line.coefficients @ taken >= truth[line.goal] - 1e-9
    whole = np.union1d(index, np.flatnonzero(part.forced))
    for truth_here, line in tangents_at(part, whole, np.ones(whole.size)):
        assert truth_here == pytest.approx(expected_utilities(part, whole)[line.goal], abs=1e-12)
        # a coefficient is cut only where it alone would pass 1, so at a whole point the line may lie above
        assert line.constant + line.coefficients[whole].sum() >= truth_here - 1e-9


def test_without_any_limit_the_bound_is_what_all_slots_together_teach() -> None:
    """One slot a night, no spacing, no account: the best plan is everything, and the bound may be 0.1 % above."""
    problem = invented_problem(
        5, targets=1, setups=1, nights=12, chance_of_slot=1.0, at_least_days=0.0, hours=1e4, tell=0.25, counts=False
    )
    part = problem.targets[0]
    every = value_of(part, expected_utilities(part, np.arange(12)), utilities_without_looks(part))
    bound = best_possible(problem)
    assert every > 0.05
    assert bound.bound >= every
    assert bound.bound == pytest.approx(every, rel=1e-3)
    assert bound.shares == pytest.approx(np.ones(12), abs=1e-6)


@pytest.mark.parametrize("seed", [0, 1, 8])
def test_open_nodes_keep_the_bound_up_until_they_are_closed(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """With one node the best set is met already, but nothing is proven: the bound stays at the relaxation's."""
    part = target(seed)
    pricer = TargetPricer(part, 1, np.arange(part.slots.size))
    costs = np.random.default_rng(seed).uniform(0.05, 0.3, size=part.slots.size)
    exact = best_by_trying_everything(pricer, costs)
    monkeypatch.setattr(module, "NODES", 1)
    few = ExactPricer(pricer, []).price(costs, 0.0)
    assert few.bound > exact + 0.005
    monkeypatch.setattr(module, "NODES", 500)
    assert ExactPricer(pricer, []).price(costs, 0.0).bound < few.bound - 0.004
