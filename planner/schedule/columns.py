"""The columns found so far, and the linear programme over them that gives prices."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints, lock
from planner.schedule.highs import OPTIMAL, Model
from planner.schedule.nights import SharedRow
from planner.schedule.pricing import Column
from planner.schedule.problem import Problem


class Pool:
    """All columns, in order of discovery; a set is held once."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self.columns: list[Column] = []
        self._known: dict[tuple[int, tuple[int, ...]], int] = {}

    def add(self, column: Column) -> int:
        """Add a column unless it is there; return its number."""
        key = (column.target, column.slots)
        if key not in self._known:
            self._known[key] = len(self.columns)
            self.columns.append(column)
        return self._known[key]

    def __len__(self) -> int:
        return len(self.columns)

    def slots(self, number: int) -> Ints:
        """Global slots of a column."""
        column = self.columns[number]
        return self.problem.targets[column.target].slots[list(column.slots)]

    def owners(self) -> Ints:
        """Target of each column, (C,)."""
        return np.array([column.target for column in self.columns], dtype=np.int64)

    def values(self) -> Floats:
        """Expected-information value of each column, (C,)."""
        return np.array([column.value for column in self.columns], dtype=float)

    def of_target(self, target: int) -> Ints:
        """Numbers of the columns of one target."""
        return np.flatnonzero(self.owners() == target)

    def use(self, rows: list[SharedRow]) -> Floats:
        """How much of each row each column uses, (rows, C), in the row's own unit."""
        lengths = np.array([len(column.slots) for column in self.columns], dtype=np.int64)
        ends = np.cumsum(lengths)
        flat = np.concatenate([self.slots(c) for c in range(len(self.columns))]) if lengths.sum() else np.empty(0, int)
        result = np.zeros((len(rows), len(self.columns)))
        dense = np.zeros(self.problem.size)
        for r, row in enumerate(rows):
            dense[row.slots] = row.part
            total = np.concatenate(([0.0], np.cumsum(dense[flat])))
            result[r] = total[ends] - total[ends - lengths]
            dense[row.slots] = 0.0
        result[np.abs(result) < 1e-9] = 0.0
        return result


@dataclass(frozen=True)
class ColumnPrices:
    """Optimum of the linear programme over columns."""

    value: float
    shares: Floats  # (C,)
    row_prices: Floats  # (rows,) value a unit of the row, not below 0
    target_prices: Floats  # (targets,)

    def __post_init__(self) -> None:
        lock(self)


def price_columns(
    pool: Pool,
    rows: list[SharedRow],
    values: Floats | None = None,
    allowed: Ints | None = None,
    floor: tuple[Floats, float] | None = None,
) -> ColumnPrices:
    """Solve the linear programme over columns: one column a target, every shared row kept.

    ``values``: (C,), expected-information values when left out; ``allowed``: columns that may be used;
    ``floor``: (values, least sum) of another measure that must be reached.
    """
    index = np.arange(len(pool)) if allowed is None else allowed
    objective = (pool.values() if values is None else values)[index]
    model = Model(-objective, np.zeros(index.size), np.full(index.size, np.inf))
    add_master_rows(model, pool, rows, index)
    if floor is not None:
        add_floor(model, floor, index)
    status = model.run()
    if status != OPTIMAL:
        raise PlanningError(f"the linear programme over columns ended as {status!r}; report this problem")
    targets = len(pool.problem.targets)
    prices = -model.row_prices()[: targets + len(rows)]
    shares = np.zeros(len(pool))
    shares[index] = np.clip(model.values(), 0.0, 1.0)
    return ColumnPrices(
        value=-model.objective,
        shares=shares,
        row_prices=np.maximum(0.0, prices[targets:]) / row_scales(rows),
        target_prices=prices[:targets],
    )


def row_scales(rows: list[SharedRow]) -> Floats:
    """Largest coefficient of each row, so that rows go to the solver with coefficients up to about 1."""
    return np.array([max(1e-9, float(row.part.max())) if row.part.size else 1.0 for row in rows])


def add_master_rows(model: Model, pool: Pool, rows: list[SharedRow], index: Ints) -> None:
    """Give a model over the columns ``index`` its rows: exactly one column a target, then the limits."""
    owners = pool.owners()[index]
    targets = len(pool.problem.targets)
    groups = [np.flatnonzero(owners == t) for t in range(targets)]
    model.add_rows(np.ones(targets), np.ones(targets), groups, [np.ones(g.size) for g in groups])
    add_limits(model, pool.use(rows)[:, index], rows)


def add_floor(model: Model, floor: tuple[Floats, float], index: Ints) -> None:
    """Ask that the columns taken reach a least sum of another measure; ``floor``: ((C,), least sum)."""
    values, least = floor
    some = np.arange(index.size, dtype=np.int64)
    model.add_rows(np.array([least]), np.array([np.inf]), [some], [values[index]])


def add_limits(model: Model, use: Floats, rows: list[SharedRow]) -> None:
    """Add shared rows to a model over columns; ``use``: (rows, C)."""
    if not rows:
        return
    scale = row_scales(rows)
    touched = [np.flatnonzero(line) for line in use]
    model.add_rows(
        np.full(len(rows), -np.inf),
        np.array([row.limit for row in rows]) / scale,
        touched,
        [line[t] / s for line, t, s in zip(use, touched, scale, strict=True)],
    )


def slot_costs(problem: Problem, rows: list[SharedRow], prices: Floats) -> Floats:
    """What each slot costs at the prices of the shared rows, (K,)."""
    cost = np.zeros(problem.size)
    for row, price in zip(rows, prices, strict=True):
        if price > 0.0:
            cost[row.slots] += price * row.part
    return cost
