"""The solver on invented problems: against every possible plan, and against every limit."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from itertools import pairwise, permutations, product

import numpy as np
import pytest
from invented_problems import invented_problem

from planner.errors import PlanningError
from planner.records import Outcome
from planner.schedule.best_possible import best_possible
from planner.schedule.everything import ceiling, everything
from planner.schedule.problem import Problem, Spacing, TargetPart, gap_conflicts
from planner.schedule.solve import ALL_MET, NOTHING_HELPS, Solution, solve
from planner.schedule.utility import expected_utilities, utilities_without_looks, value_of

SECONDS = 600.0  # a generous stop: effort, not the clock, must end these


# ------------------------------------------------------------------ slow twins


def keeps_spacing(part: TargetPart, chosen: list[int]) -> bool:
    """Slow twin of the spacing rules, straight from their words."""
    times = part.middle_mjd
    for i in chosen:
        for j in chosen:
            both = part.forced[i] and part.forced[j]
            if i < j and not both and abs(times[i] - times[j]) < part.at_least_days - 1e-9:
                return False
    for i, j in pairwise(chosen):
        if part.forced[i] and part.forced[j]:
            continue
        step = max(part.at_least_days, 1e-9)
        between = [k for k in range(times.size) if times[i] + step <= times[k] + 1e-9 <= times[j] - step + 2e-9]
        if times[j] - times[i] > part.at_most_days + 1e-9 and between:
            return False
    return True


def night_works(problem: Problem, slots: list[int]) -> bool:
    """Slow twin: each telescope by all orders (whole minutes, so no tolerance is needed beyond round-off)."""
    for telescope in set(problem.telescope[slots].tolist()):
        mine = [k for k in slots if problem.telescope[k] == telescope]
        mine.sort(key=lambda k: problem.earliest_mjd[k])
        groups: list[list[int]] = []
        for k in mine:
            if groups and problem.earliest_mjd[k] < max(problem.latest_mjd[j] for j in groups[-1]):
                groups[-1].append(k)
            else:
                groups.append([k])
        for group in groups:
            if not any(_in_order(problem, order) for order in permutations(group)):
                return False
    return True


def _in_order(problem: Problem, order: tuple[int, ...]) -> bool:
    clock = -np.inf
    for k in order:
        clock = max(clock, problem.earliest_mjd[k]) + problem.minutes[k] / 1440
        if clock > problem.latest_mjd[k] + 1e-9:
            return False
    return True


def within_accounts(problem: Problem, slots: list[int]) -> bool:
    return all(
        sum(problem.charge[k] for k in slots if problem.allocation[k] == a) <= limit + 1e-6
        for a, limit in enumerate(problem.limits)
    )


def value(part: TargetPart, chosen: list[int]) -> float:
    return value_of(part, expected_utilities(part, chosen), utilities_without_looks(part))


def all_plans(problem: Problem) -> Iterator[tuple[float, list[int]]]:
    choices = []
    for part in problem.targets:
        sets = []
        for pattern in product([0, 1], repeat=part.slots.size):
            chosen = [k for k, taken in enumerate(pattern) if taken or part.forced[k]]
            if all(taken or not part.forced[k] for k, taken in enumerate(pattern)) and keeps_spacing(part, chosen):
                sets.append((value(part, chosen), [int(k) for k in part.slots[chosen]]))
        choices.append(sets)
    for combination in product(*choices):
        yield sum(v for v, _ in combination), [k for _, slots in combination for k in slots]


def best_by_trying_everything(problem: Problem) -> float:
    plans = sorted(all_plans(problem), key=lambda plan: -plan[0])
    return next(v for v, slots in plans if within_accounts(problem, slots) and night_works(problem, slots))


def check_plan(problem: Problem, plan: Solution) -> None:
    """Every limit, recounted without the solver."""
    slots = [int(k) for k in plan.slots]
    assert len(set(slots)) == len(slots)
    assert within_accounts(problem, slots)
    total = 0.0
    for part in problem.targets:
        chosen = [i for i, k in enumerate(part.slots) if int(k) in slots]
        assert keeps_spacing(part, chosen)
        assert all(i in chosen for i in np.flatnonzero(part.forced))
        total += value(part, chosen)
    assert plan.value == pytest.approx(total, abs=1e-9)
    ends = plan.start_mjd + problem.minutes[plan.slots] / 1440
    assert np.all(plan.start_mjd >= problem.earliest_mjd[plan.slots] - 1e-7)
    assert np.all(ends <= problem.latest_mjd[plan.slots] + 1e-7)
    for telescope in np.unique(problem.telescope[plan.slots]):
        on_it = problem.telescope[plan.slots] == telescope
        assert np.all(plan.start_mjd[on_it][1:] >= ends[on_it][:-1] - 1e-6)
    assert plan.value <= plan.best_possible * (1 + 1e-9)
    assert plan.value_realised <= plan.value + 1e-9
    assert plan.value >= 0.99 * plan.proof_value - 1e-9


def small(seed: int) -> Problem:
    """At most 12 slots of 2 or 3 targets; nights and accounts that bind."""
    problem = invented_problem(seed, targets=2 + seed % 2, nights=3, chance_of_slot=0.55, hours=3.5, night_hours=4.0)
    return problem if problem.size <= 12 else invented_problem(seed, targets=2, nights=2, hours=3.5, night_hours=4.0)


# ------------------------------------------------------------------ against every possible plan


@pytest.mark.parametrize("seed", range(12))
def test_small_problems_are_solved_as_well_as_by_trying_everything(seed: int) -> None:
    problem = small(seed)
    assert problem.size <= 12
    exact = best_by_trying_everything(problem)
    plan = solve(problem, seed=seed, seconds=SECONDS)
    check_plan(problem, plan)
    assert best_possible(problem).bound >= exact * (1 - 1e-9)
    assert plan.best_possible >= exact * (1 - 1e-9)
    # every set of so small a target is a column, so only the integer gap of 1e-4 is left
    assert plan.proof_value >= exact * (1 - 2e-4) - 1e-9


@pytest.mark.parametrize("seed", range(4))
def test_priced_columns_reach_what_trying_everything_reaches(seed: int, monkeypatch: pytest.MonkeyPatch) -> None:
    """With listing all sets switched off, heuristic and exact pricing must find the same plans and bounds."""
    import planner.schedule.pricing as pricing

    monkeypatch.setattr(pricing, "COMPLETE_SLOTS", -1)
    problem = small(seed)
    exact = best_by_trying_everything(problem)
    plan = solve(problem, seed=seed, seconds=SECONDS)
    check_plan(problem, plan)
    assert plan.best_possible >= exact * (1 - 1e-9)
    assert plan.proof_value >= exact * 0.97  # pricing is heuristic; 3 % is what it is asked for


@pytest.mark.parametrize("seed", range(3))
def test_largest_spacing_is_kept(seed: int) -> None:
    problem = invented_problem(seed, targets=2, setups=2, nights=5, at_least_days=0.9, at_most_days=2.2, hours=6.0)
    problem = _only_first_slots(problem, 6)
    exact = best_by_trying_everything(problem)
    plan = solve(problem, seed=1, seconds=SECONDS)
    check_plan(problem, plan)
    assert plan.best_possible >= exact * (1 - 1e-9)
    assert plan.proof_value >= exact * (1 - 2e-4) - 1e-9


def _only_first_slots(problem: Problem, most: int) -> Problem:
    """Hide later slots of each target behind chances and rows of zero (numbers of slots stay)."""
    parts = []
    for part in problem.targets:
        keep = np.arange(part.slots.size) < most
        parts.append(
            replace(
                part,
                goals=tuple(replace(g, usable=g.usable[:, keep]) if hasattr(g, "usable") else g for g in part.goals),
                slots=part.slots[keep],
                chance=part.chance[keep],
                rows=part.rows[:, keep],
                middle_mjd=part.middle_mjd[keep],
                forced=part.forced[keep],
            )
        )
    return replace(problem, targets=tuple(parts))


# ------------------------------------------------------------------ middle size


@pytest.fixture(scope="module")
def middle() -> Problem:
    return invented_problem(
        4, targets=3, setups=2, nights=13, draws=4, size=4, observables=2, hours=12.0, tell=0.3, at_least_days=1.8
    )


@pytest.fixture(scope="module")
def middle_plan(middle: Problem) -> Solution:
    return solve(middle, seed=3, seconds=SECONDS)


def test_middle_sized_plan_keeps_every_limit_and_is_close_to_its_bound(middle: Problem, middle_plan: Solution) -> None:
    check_plan(middle, middle_plan)
    assert middle_plan.outcome in (Outcome.PROVEN, Outcome.GOOD)
    assert middle_plan.proof_shortfall <= 0.05  # looks of 30-180 min against 9 h: rough granularity
    assert middle_plan.notes == ()


def test_same_seed_gives_the_same_plan_bit_for_bit(middle: Problem, middle_plan: Solution) -> None:
    again = solve(middle, seed=3, seconds=SECONDS)
    assert np.array_equal(again.slots, middle_plan.slots)
    assert np.array_equal(again.start_mjd, middle_plan.start_mjd)
    assert (again.value, again.value_realised, again.best_possible) == (
        middle_plan.value,
        middle_plan.value_realised,
        middle_plan.best_possible,
    )


def test_stopping_early_still_gives_a_plan_that_keeps_every_limit(middle: Problem) -> None:
    plan = solve(middle, seed=3, seconds=0.0)
    check_plan(middle, plan)
    assert plan.outcome is Outcome.STOPPED
    assert plan.notes == ("stopped by the clock: the best plan so far",)


def test_a_stop_asked_for_from_outside_ends_it(middle: Problem) -> None:
    asked = iter([False] * 12)
    plan = solve(middle, seed=3, seconds=SECONDS, should_stop=lambda: next(asked, True))
    check_plan(middle, plan)
    assert plan.outcome is Outcome.STOPPED
    assert plan.value > 0.0


def test_an_interrupt_keeps_the_best_plan_so_far(middle: Problem) -> None:
    def press(stage: str, share: float) -> None:
        if stage == "looks" and share > 0.1:
            raise KeyboardInterrupt

    plan = solve(middle, seed=3, seconds=SECONDS, progress=press)
    check_plan(middle, plan)
    assert plan.outcome is Outcome.STOPPED
    assert plan.notes == ("interrupted: the best plan so far",)
    assert plan.value > 0.0


def test_fewer_hours_never_raise_the_bound(middle: Problem) -> None:
    bounds = [best_possible(replace(middle, limits=middle.limits * f)).bound for f in (1.0, 0.6, 0.3, 0.0)]
    assert all(more >= less - 1e-6 for more, less in pairwise(bounds))
    assert bounds[0] > bounds[2] > bounds[3]


def test_reduced_costs_and_prices_are_reported(middle: Problem, middle_plan: Solution) -> None:
    assert middle_plan.reduced.shape == (middle.size,)
    assert np.all(middle_plan.allocation_prices >= 0.0)
    assert np.any(middle_plan.allocation_prices > 0.0)
    facts = middle_plan.facts[0]
    assert facts.slots == middle.targets[0].slots.size
    assert facts.everything >= facts.value


# ------------------------------------------------------------------ fixed looks


def _with_forced(problem: Problem, which: dict[int, list[int]]) -> Problem:
    parts = list(problem.targets)
    early, late = problem.earliest_mjd.copy(), problem.latest_mjd.copy()
    for t, local in which.items():
        forced = np.zeros(parts[t].slots.size, dtype=bool)
        forced[local] = True
        parts[t] = replace(parts[t], forced=forced)
        for k in parts[t].slots[local]:
            late[k] = early[k] + problem.minutes[k] / 1440
    return replace(problem, targets=tuple(parts), earliest_mjd=early, latest_mjd=late)


@pytest.mark.parametrize("seed", range(4))
def test_fixed_looks_are_kept_and_the_bound_holds_with_them(seed: int) -> None:
    problem = _with_forced(small(seed), {0: [seed % 2]})
    exact = best_by_trying_everything(problem)
    plan = solve(problem, seed=1, seconds=SECONDS)
    check_plan(problem, plan)
    assert plan.best_possible >= exact * (1 - 1e-9)
    assert plan.proof_value >= exact * (1 - 2e-4) - 1e-9


def test_fixed_looks_that_overlap_are_named() -> None:
    problem = invented_problem(1, setups=1)
    problem = _with_forced(problem, {0: [0], 1: [0]})
    one, two = int(problem.targets[0].slots[0]), int(problem.targets[1].slots[0])
    early = problem.earliest_mjd.copy()
    early[two] = early[one]
    late = problem.latest_mjd.copy()
    late[two] = early[two] + problem.minutes[two] / 1440
    with pytest.raises(PlanningError, match=r"invented 0 \(slot \d+\) and invented 1 \(slot \d+\)"):
        solve(replace(problem, earliest_mjd=early, latest_mjd=late), seed=1)


def test_fixed_looks_that_overdraw_an_account_are_named() -> None:
    problem = _with_forced(invented_problem(1, setups=1, nights=8), {0: [0], 1: [2]})
    with pytest.raises(PlanningError, match=r"fixed looks need \d+ min of allocation 0, which has 10 min: invented"):
        solve(replace(problem, limits=np.array([10.0])), seed=1)


# ------------------------------------------------------------------ outcomes


def test_goals_that_are_met_need_nothing() -> None:
    problem = invented_problem(2, counts=False)
    met = tuple(
        replace(part, goals=tuple(replace(g, wanted=g.wanted * 1e-6) for g in part.goals)) for part in problem.targets
    )
    plan = solve(replace(problem, targets=met), seed=1)
    assert (plan.value, plan.shortfall, plan.proof_shortfall) == (0.0, 0.0, 0.0)
    assert plan.outcome is Outcome.PROVEN
    assert plan.notes == (ALL_MET,)


def test_without_slots_nothing_helps() -> None:
    problem = invented_problem(2, chance_of_slot=0.0)
    plan = solve(problem, seed=1)
    assert plan.outcome is Outcome.IMPOSSIBLE
    assert plan.notes == (NOTHING_HELPS,)
    assert plan.slots.size == 0
    assert plan.shortfall == 0.0


def test_proven_and_good_are_told_apart(monkeypatch: pytest.MonkeyPatch) -> None:
    import planner.schedule.solve as module

    problem = small(2)
    assert solve(problem, seed=1).outcome is Outcome.PROVEN
    monkeypatch.setattr(module, "PROVEN_SHORTFALL", -1.0)
    assert solve(problem, seed=1).outcome is Outcome.GOOD


# ------------------------------------------------------------------ spacing and what everything could do


def test_spacing_answers_agree_with_the_words_of_the_rules() -> None:
    for seed in range(5):
        part = invented_problem(seed, targets=2, nights=5, at_least_days=0.9, at_most_days=2.2).targets[0]
        part = replace(part, forced=np.arange(part.slots.size) == 1)
        spacing = Spacing.of(part)
        rng = np.random.default_rng(seed)
        for _ in range(60):
            chosen = [int(k) for k in np.flatnonzero(rng.random(part.slots.size) < 0.3)]
            assert spacing.kept(chosen) == keeps_spacing(part, chosen)
            if spacing.kept(chosen):
                joins = spacing.may_join(chosen)
                for k in range(part.slots.size):
                    expected = k not in chosen and keeps_spacing(part, sorted([*chosen, k]))
                    assert joins[k] == expected


def test_fixed_looks_never_exclude_one_another() -> None:
    part = invented_problem(1, targets=1, nights=5, at_least_days=9.0).targets[0]
    forced = np.zeros(part.slots.size, dtype=bool)
    forced[:2] = True
    clash = gap_conflicts(replace(part, forced=forced))
    assert not clash[0, 1]
    assert clash[0, 2]
    assert clash[1, 2]
    assert not clash.diagonal().any()


def test_everything_is_what_all_slots_teach_and_counts() -> None:
    problem = invented_problem(3, targets=2)
    reach = everything(problem)
    part = problem.targets[1]
    full = np.array(
        [
            part.prior_precision
            + sum(part.chance[k] * part.rows[b, k].T @ part.rows[b, k] for k in range(part.slots.size))
            for b in range(4)
        ]
    )
    c = part.goals[0].gradient
    sd = [float(np.sqrt(c[b] @ np.linalg.inv(full[b]) @ c[b])) for b in range(4)]
    assert reach[1][0] == pytest.approx(np.median(sd))
    assert reach[1][1] == pytest.approx(np.mean(part.goals[1].usable @ part.chance))
    top = ceiling(part)
    assert top.gains[0] >= 1.0 - 1e-9
    best = top.best @ full.mean(axis=0) @ top.best
    assert best == pytest.approx(top.gains[-1])  # scaled to 1 in the prior
    assert top.goals[0].prior_median_sd > top.goals[0].median_sd
