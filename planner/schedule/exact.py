"""The best set of looks of one target at given prices, with a proven bound.

A linear programme over the target's slots with tangents until tight; slots whose reduced cost rules them out are
fixed; the rest is settled by branching, best bound first, with the same linear programme kept warm and tangents
added at every node. Nodes are counted, and when they run out the bound is that of the open nodes. The largest
spacing is left out (which only raises the bound); sets that break it are not handed back.
"""

from __future__ import annotations

import heapq
from collections.abc import Callable
from dataclasses import dataclass, field

import numpy as np

from planner.records import Floats, Ints
from planner.schedule.best_possible import broken_spacing
from planner.schedule.highs import INFEASIBLE, OPTIMAL, Model
from planner.schedule.pricing import TargetPricer
from planner.schedule.tangents import Tangent, tangents_at
from planner.schedule.utility import weights

LP_ROUNDS = 20
NODES = 80  # of one call; a node is one to four warm linear programmes, a few milliseconds
NODE_ROUNDS = 4
MOST_LEFT = 300  # with more slots left after fixing, nodes are slow and the bound hardly moves
MOST_NEAR = 40  # sets near the best are looked for only among so few slots
_TIGHT = 1e-5  # utility above the truth that is left alone
_SAFE = 1e-7  # added to every bound: tolerance of the solver, in value


@dataclass
class ExactPrice:
    """What exact pricing found."""

    bound: float  # no set of this target has a larger value less cost
    sets: list[tuple[int, ...]] = field(default_factory=list)  # met on the way, spacing kept


class ExactPricer:
    """Keeps a target's tangents from call to call."""

    def __init__(self, pricer: TargetPricer, tangents: list[Tangent]) -> None:
        self.pricer, self.part = pricer, pricer.part
        self.tangents = list(tangents)
        clash = np.any(pricer.spacing.clash[self.part.forced], axis=0)
        self.free = np.flatnonzero(~clash & ~self.part.forced)
        self.forced = np.flatnonzero(self.part.forced)
        self._windows: list[Ints] = []

    def price(
        self, costs: Floats, known: float, near: float = 0.0, stop: Callable[[], bool] = lambda: False
    ) -> ExactPrice:
        """Bound and find the best set.

        ``costs``: (K_i,) not negative; ``known``: value less cost of a known set; ``near``: sets that fall short
        of it by less than this are looked for too, as far as the nodes reach (an integer choice may need them).
        """
        base = -float(weights(self.part) @ self.pricer.start) - float(costs[self.forced].sum())
        bound, reduced = self._relaxed(costs, base, stop)
        result = ExactPrice(max(bound, known) + _SAFE)
        left = self.free[reduced > -(bound - known + near) - 1e-9]
        if left.size > MOST_NEAR and near > 0.0:
            near, left = 0.0, self.free[reduced > -(bound - known) - 1e-9]
        if left.size == 0:
            alone = self.pricer.value(self.pricer.forced) - float(costs[self.forced].sum())
            result.bound = min(result.bound, max(known, alone) + _SAFE)
        elif bound > known - near + _SAFE and left.size <= MOST_LEFT and not stop():
            self._branch(costs, base, known, near, left, result, stop)
        return result

    def _model(self, costs: Floats, index: Ints) -> Model:
        cost = np.concatenate((costs[index], -weights(self.part)))
        model = Model(cost, np.zeros(cost.size), np.ones(cost.size))
        self._rows(model, index, self.tangents)
        return model

    def _rows(self, model: Model, index: Ints, lines: list[Tangent]) -> None:
        place = np.arange(index.size)
        touched = [np.flatnonzero(line.coefficients[index] > 0.0) for line in lines]
        model.add_rows(
            np.full(len(lines), -np.inf),
            np.array([line.constant for line in lines]),
            [np.concatenate((place[t], [index.size + line.goal])) for t, line in zip(touched, lines, strict=True)],
            [np.concatenate((-line.coefficients[index][t], [1.0])) for t, line in zip(touched, lines, strict=True)],
        )

    def _spacing(self, model: Model, index: Ints, windows: list[Ints]) -> None:
        inside = [np.flatnonzero(np.isin(index, w)) for w in windows]
        inside = [w for w in inside if w.size > 1]
        model.add_rows(np.full(len(inside), -np.inf), np.ones(len(inside)), inside, [np.ones(w.size) for w in inside])

    def _cuts(self, index: Ints, values: Floats) -> list[Tangent]:
        x, u = values[: index.size], values[index.size :]
        on = x > 1e-7
        return [
            line
            for truth, line in tangents_at(self.part, index[on], np.clip(x[on], 0.0, 1.0))
            if u[line.goal] > truth + _TIGHT
        ]

    def _relaxed(self, costs: Floats, base: float, stop: Callable[[], bool]) -> tuple[float, Floats]:
        model = self._model(costs, self.free)
        self._spacing(model, self.free, self._windows)
        bound, reduced = np.inf, np.zeros(self.free.size)
        for _ in range(LP_ROUNDS):
            if model.run() != OPTIMAL:
                break
            bound = base - model.objective
            reduced = -model.reduced_costs()[: self.free.size]
            values = model.values()
            shares = np.zeros(self.part.slots.size)
            shares[self.free] = values[: self.free.size]
            windows = broken_spacing(self.part, shares)
            lines = self._cuts(self.free, values)
            if not (windows or lines) or stop():
                break
            self._windows.extend(windows)
            self._spacing(model, self.free, windows)
            self.tangents.extend(lines)
            self._rows(model, self.free, lines)
        return bound, reduced

    def _branch(
        self, costs: Floats, base: float, known: float, near: float, left: Ints, result: ExactPrice,
        stop: Callable[[], bool],
    ) -> None:  # fmt: skip
        model = self._model(costs, left)
        everywhere = np.zeros(self.part.slots.size)
        everywhere[left] = 1.0
        self._spacing(model, left, broken_spacing(self.part, everywhere))
        heap: list[tuple[float, int, tuple[tuple[int, int], ...]]] = [(-result.bound, 0, ())]
        seen: set[tuple[int, ...]] = set()
        for count in range(NODES):
            if not heap or -heap[0][0] <= known - near or stop():
                break
            above, _, fixed = heapq.heappop(heap)
            bound, x = self._node(model, left, base, fixed, known - near)
            bound = min(bound, -above)
            if x is None or bound <= known - near:
                continue
            chosen = tuple(sorted((*self.pricer.forced, *(int(k) for k in left[x > 0.5]))))
            if chosen not in seen and self.pricer.spacing.kept(chosen):
                seen.add(chosen)
                net = self.pricer.value(chosen) - float(costs[list(chosen)].sum())
                if net > known - near:
                    result.sets.append(chosen)
                known = max(known, net)
            split = int(np.argmin(np.abs(x - 0.5)))
            if any(column == split for column, _ in fixed) or abs(x[split] - 0.5) > 0.5 - 1e-6:
                open_columns = [i for i in range(left.size) if all(i != column for column, _ in fixed)]
                if near <= 0.0 or not open_columns:
                    known = max(known, bound)  # whole and tight: the node's own optimum
                    continue
                split = open_columns[0]  # whole, but others near it may hide below
            for side in (0, 1):
                heapq.heappush(heap, (-bound, 2 * count + side + 1, (*fixed, (split, side))))
        # a heap entry bounds every set below it; what was cut off is not above ``known``
        open_bound = -heap[0][0] if heap else -np.inf
        result.bound = min(result.bound, max(known, open_bound) + _SAFE)

    def _node(
        self, model: Model, left: Ints, base: float, fixed: tuple[tuple[int, int], ...], enough: float
    ) -> tuple[float, Floats | None]:
        """Bound of one node, and its shares; None when no set is left there."""
        lower, upper = np.zeros(left.size), np.ones(left.size)
        for column, side in fixed:
            lower[column] = upper[column] = float(side)
        model.set_bounds(lower, upper)
        bound, x = np.inf, None
        for _ in range(NODE_ROUNDS):
            status = model.run()
            if status == INFEASIBLE:
                return -np.inf, None
            if status != OPTIMAL:
                break
            bound, values = base - model.objective, model.values()
            x = values[: left.size]
            lines = self._cuts(left, values)
            if not lines or bound <= enough:
                break
            self._rows(model, left, lines)
        return bound, x
