"""Growing sets by what they realise."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from invented_problems import invented_problem

from planner.schedule.pricing import TargetPricer
from planner.schedule.problem import LearnPart
from planner.schedule.realised_pricing import RealisedPricer
from planner.schedule.utility import draw_luck, realised_utilities, value_of


def _pricer(seed: int) -> RealisedPricer:
    problem = invented_problem(seed)
    part = problem.targets[0]
    usual = TargetPricer(part, 0, np.arange(part.slots.size))
    return RealisedPricer(usual, draw_luck(seed, 0, part.slots.size))


@pytest.mark.parametrize("seed", [1, 2, 3])
def test_gains_of_all_candidates_equal_judging_each_set_alone(seed: int) -> None:
    """Up to four looks every outcome is summed on both sides, so the two must agree to round-off."""
    pricer = _pricer(seed)
    for chosen in ((), (0,), (0, min(3, pricer.kept.size - 1))):
        candidates = np.array([i for i, k in enumerate(pricer.kept) if int(k) not in chosen])
        found = pricer.values_after(chosen, candidates)
        for value, i in zip(found, candidates, strict=True):
            both = tuple(sorted((*chosen, int(pricer.kept[i]))))
            alone = value_of(pricer.part, realised_utilities(pricer.part, both, pricer.luck), pricer.start)
            assert value == pytest.approx(alone, abs=1e-9)


def test_a_look_that_tells_everything_still_wants_a_backup() -> None:
    """By expected information one overwhelming look is enough; by what is realised the second adds its chance."""
    pricer = _pricer(1)
    goal = pricer.part.goals[0]
    assert isinstance(goal, LearnPart)
    rng = np.random.default_rng(0)
    rows = rng.normal(size=(*pricer.part.rows.shape[:2], 3, 3)) * 1e3  # every look measures all three parameters
    loud = replace(
        pricer.part, rows=rows, chance=np.full(pricer.part.slots.size, 0.6),
        goals=(replace(goal, wanted=goal.wanted * 100.0),),
    )  # fmt: skip
    usual = TargetPricer(loud, 0, np.arange(loud.slots.size))
    honest = RealisedPricer(usual, draw_luck(1, 0, loud.slots.size))
    first = usual.grow(np.full(loud.slots.size, 1e-3))
    assert len(first) == 1
    assert len(honest.grow(np.full(loud.slots.size, 1e-3))) > 1
