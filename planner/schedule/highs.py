"""The one way this package talks to HiGHS: one thread, fixed seed, every status looked at."""

from __future__ import annotations

import os
import sys
import threading
from collections.abc import Sequence
from typing import Any

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints

TOLERANCE = 1e-9  # feasibility and integrality; the tightest that HiGHS takes is 1e-10
OPTIMAL, TIME_LIMIT, NODE_LIMIT, INFEASIBLE = "optimal", "time limit", "node limit", "infeasible"

_first = threading.Lock()
_greeted = False


def _made_quietly(kit: Any) -> Any:
    """Make a solver without the greeting that HiGHS 1.16 writes to file descriptor 1 before any option is read.

    Only the command line may print, and its output may be parsed, so the first one is made with the descriptor
    pointed at nothing for a moment.
    """
    global _greeted
    with _first:
        if _greeted:
            return kit.Highs()
        if sys.stdout is not None:
            sys.stdout.flush()
        try:
            kept = os.dup(1)
        except OSError:  # no standard output at all
            return kit.Highs()
        nothing = os.open(os.devnull, os.O_WRONLY)
        try:
            os.dup2(nothing, 1)
            solver = kit.Highs()
        finally:
            os.dup2(kept, 1)
            os.close(kept)
            os.close(nothing)
        _greeted = True
        return solver


class Model:
    """A minimisation in HiGHS whose rows all read `low <= a x <= high`; rows and columns can be added."""

    def __init__(
        self,
        cost: Floats,
        lower: Floats,
        upper: Floats,
        *,
        integer: bool = False,
    ) -> None:
        import highspy

        self._kit = highspy
        self.solver: Any = _made_quietly(highspy)
        for option, value in (
            ("output_flag", False),
            ("threads", 1),
            ("parallel", "off"),
            ("random_seed", 1),
            ("primal_feasibility_tolerance", TOLERANCE),
            ("dual_feasibility_tolerance", TOLERANCE),
        ):
            self._checked(self.solver.setOptionValue(option, value), option)
        if not integer:
            self._checked(self.solver.setOptionValue("solver", "simplex"), "solver")
            self._checked(self.solver.setOptionValue("simplex_strategy", 1), "simplex_strategy")  # dual, serial
        else:
            self._checked(self.solver.setOptionValue("mip_feasibility_tolerance", 1e-8), "mip tolerance")
        empty = np.empty(0)
        count = cost.size
        self._checked(
            self.solver.addCols(
                count, cost, lower, upper, 0, np.zeros(count, dtype=np.int32), empty.astype(np.int32), empty
            ),
            "addCols",
        )
        if integer:
            kinds = np.full(count, self._kit.HighsVarType.kInteger.value, dtype=np.uint8)
            where = np.arange(count, dtype=np.int32)
            self._checked(self.solver.changeColsIntegrality(count, where, kinds), "integrality")

    def _checked(self, status: Any, what: str) -> None:
        if status == self._kit.HighsStatus.kError:
            raise PlanningError(f"HiGHS refused {what}; report this problem")

    def set_bounds(self, lower: Floats, upper: Floats) -> None:
        """Change the bounds of the first columns."""
        where = np.arange(lower.size, dtype=np.int32)
        self._checked(self.solver.changeColsBounds(lower.size, where, lower, upper), "bounds")

    def add_rows(self, low: Floats, high: Floats, index: Sequence[Ints], value: Sequence[Floats]) -> None:
        """Add rows, each given by the columns it touches and their coefficients."""
        if not index:
            return
        starts = np.concatenate(([0], np.cumsum([len(i) for i in index])[:-1])).astype(np.int32)
        flat = np.concatenate(index).astype(np.int32)
        self._checked(
            self.solver.addRows(len(index), low, high, flat.size, starts, flat, np.concatenate(value).astype(float)),
            "addRows",
        )

    def start_from(self, values: Floats) -> None:
        """Offer a whole solution to start from."""
        solution = self._kit.HighsSolution()
        solution.col_value = [float(v) for v in values]
        solution.value_valid = True
        self._checked(self.solver.setSolution(solution), "setSolution")

    def limit(self, *, seconds: float | None = None, nodes: int | None = None, gap: float | None = None) -> None:
        """Set how far the next run may go (``seconds`` is the safety stop, never the effort)."""
        if seconds is not None:
            spent = float(self.solver.getRunTime())
            self._checked(self.solver.setOptionValue("time_limit", spent + max(0.05, seconds)), "time_limit")
        if nodes is not None:
            self._checked(self.solver.setOptionValue("mip_max_nodes", nodes), "mip_max_nodes")
        if gap is not None:
            self._checked(self.solver.setOptionValue("mip_rel_gap", gap), "mip_rel_gap")

    def run(self) -> str:
        """Solve; return one of the four words above. Any other end is an error naming the status."""
        self._checked(self.solver.run(), "run")
        status = self.solver.getModelStatus()
        kinds = self._kit.HighsModelStatus
        words = {
            kinds.kOptimal: OPTIMAL,
            kinds.kTimeLimit: TIME_LIMIT,
            kinds.kSolutionLimit: NODE_LIMIT,
            kinds.kIterationLimit: NODE_LIMIT,
            kinds.kInterrupt: TIME_LIMIT,
            kinds.kInfeasible: INFEASIBLE,
        }
        if status not in words:
            raise PlanningError(f"HiGHS ended with status {self.solver.modelStatusToString(status)!r}")
        return words[status]

    @property
    def has_solution(self) -> bool:
        """True when there is a feasible point to read."""
        feasible = self._kit.SolutionStatus.kSolutionStatusFeasible.value
        return int(self.solver.getInfo().primal_solution_status) == int(feasible)

    @property
    def objective(self) -> float:
        """Value of the point found."""
        return float(self.solver.getInfo().objective_function_value)

    @property
    def dual_bound(self) -> float:
        """Lower bound of an integer minimisation."""
        return float(self.solver.getInfo().mip_dual_bound)

    def values(self) -> Floats:
        """Value of each column."""
        return np.array(self.solver.getSolution().col_value)

    def row_prices(self) -> Floats:
        """Dual of each row (minimisation: not above 0 for a row that holds from above)."""
        return np.array(self.solver.getSolution().row_dual)

    def reduced_costs(self) -> Floats:
        """Reduced cost of each column (minimisation: not below 0 at its lower bound)."""
        return np.array(self.solver.getSolution().col_dual)
