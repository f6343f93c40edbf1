"""Whether the looks of a telescope's night fit one after the other, and what to tell the master when they do not.

Looks collide by their times, never by the label of their night: an array's transits of neighbouring labels and the
nights of polar sites overlap. So the looks of a telescope are split where nothing overlaps, and each group is
sequenced on its own.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from planner.errors import PlanningError
from planner.records import Floats, Ints
from planner.schedule.orders import SLACK_S, TooManyOrders, earliest_deadline_order, earliest_order
from planner.schedule.problem import Problem

DAY_SECONDS = 86_400.0  # exact
_NIGHT_OVER_MIN = 0.01  # minutes by which a window must be overfull before a night is called impossible
_ROW_SLACK_MIN = 1e-3  # rows allow 0.06 s, so that fixed looks that touch by round-off stay allowed
_RIGID_S = 2.0  # looks with less freedom than this stay at their earliest start (the clock below ticks in seconds)
_WIDEST_DAYS = 1.5  # window rows longer than this never cut anything that shorter ones do not; our choice
_EFFORT = 0.1  # deterministic seconds of CP-SAT spent on preferred moments (comfort only)
_SURE_EFFORT = 5.0  # the same to decide a night with too many orders to search


@dataclass(frozen=True)
class SharedRow:
    """A limit shared by targets: sum of part x over slots <= limit."""

    slots: Ints  # (n,) global slot numbers, ascending
    part: Floats  # (n,)
    limit: float
    what: tuple[str | float, ...]  # names the row; two rows with one name are the same row


def overlap_groups(earliest: Floats, latest: Floats) -> list[Ints]:
    """Split intervals, (n,) each, into groups that do not overlap one another; each group in order of start."""
    order = np.lexsort((latest, earliest))
    if order.size == 0:
        return []
    reach = np.maximum.accumulate(latest[order])
    breaks = np.flatnonzero(earliest[order][1:] >= reach[:-1] - SLACK_S / DAY_SECONDS) + 1
    return [np.asarray(group, dtype=np.int64) for group in np.split(order, breaks)]


def least_part_minutes(problem: Problem, slots: Ints, from_mjd: float, to_mjd: Floats | float) -> Floats:
    """Least part of each look that must fall inside [from, to], in minutes, (n,) or (m, n) for m ends."""
    to = np.asarray(to_mjd, dtype=float)[..., None]
    d = problem.minutes[slots]
    span = (to - from_mjd) * 1440.0
    after = (problem.earliest_mjd[slots] - from_mjd) * 1440.0 + d  # left when started as early as can be
    before = (to - problem.latest_mjd[slots]) * 1440.0 + d  # left when it ends as late as can be
    return np.maximum(0.0, np.minimum(np.minimum(d, span), np.minimum(after, before)))


def violated_windows(problem: Problem, taken: Ints, shares: Floats, tolerance_min: float) -> list[SharedRow]:
    """Return the window rows that a fractional or whole choice breaks by more than ``tolerance_min``.

    ``taken``: (n,) global slots with a share above 0, ``shares``: (n,). For each telescope and each start among
    the earliest starts in play, the worst end among the latest ends; of those starting on one day, the worst two.
    """
    found: list[SharedRow] = []
    for telescope in np.unique(problem.telescope[taken]):
        on_it = problem.telescope[taken] == telescope
        everyone = np.flatnonzero(problem.telescope == telescope)
        mine, x = taken[on_it], shares[on_it]
        worst: dict[int, list[tuple[float, float, float]]] = {}
        for group in overlap_groups(problem.earliest_mjd[mine], problem.latest_mjd[mine]):
            for over, a, b in _broken(problem, mine[group], x[group], tolerance_min):
                worst.setdefault(int(np.floor(a)), []).append((-over, a, b))
        for day in sorted(worst):
            for _, a, b in sorted(worst[day])[:2]:
                found.append(window_row(problem, int(telescope), everyone, a, b))
    return found


def window_row(problem: Problem, telescope: int, everyone: Ints, from_mjd: float, to_mjd: float) -> SharedRow:
    """Return the row: the parts of all looks of a telescope that must fall inside [from, to] fit into it."""
    near = everyone[(problem.earliest_mjd[everyone] < to_mjd) & (problem.latest_mjd[everyone] > from_mjd)]
    part = least_part_minutes(problem, near, from_mjd, to_mjd)
    keep = part > 1e-6
    limit = (to_mjd - from_mjd) * 1440.0 + _ROW_SLACK_MIN
    return SharedRow(near[keep], part[keep], limit, ("window", telescope, from_mjd, to_mjd))


def _broken(problem: Problem, slots: Ints, x: Floats, tolerance_min: float) -> Iterable[tuple[float, float, float]]:
    if slots.size < 2:
        return  # one look fits its own window by construction
    early, late = problem.earliest_mjd[slots], problem.latest_mjd[slots]
    for a in np.unique(early):
        near = (late > a) & (early < a + _WIDEST_DAYS)
        ends = np.unique(late[near])
        ends = ends[ends <= a + _WIDEST_DAYS]
        if ends.size == 0:
            continue
        over = least_part_minutes(problem, slots[near], float(a), ends) @ x[near] - (ends - a) * 1440.0
        worst = int(np.argmax(over))
        if over[worst] > tolerance_min:
            yield float(over[worst]), float(a), float(ends[worst])


# ------------------------------------------------------------------ exact sequencing


class Undecided(Exception):
    """Whether a night fits could not be decided within the effort; it is then not used."""


@dataclass(frozen=True)
class Fit:
    """What sequencing found: starts of every look, or the looks that together cannot be done."""

    start_mjd: dict[int, float]  # by global slot
    failing: tuple[tuple[int, ...], ...]  # minimal sets, one a group that does not fit; empty when all fit


class Sequencer:
    """Sequences looks on telescopes; remembers what it found for each group of looks."""

    def __init__(self, problem: Problem) -> None:
        self.problem = problem
        self._known: dict[tuple[int, ...], dict[int, float] | tuple[int, ...]] = {}
        self.undecided = False  # True once a night was refused because nobody could decide it in time

    def fit(self, slots: Iterable[int]) -> Fit:
        """Sequence any set of looks, telescope by telescope, group by group."""
        taken = np.array(sorted(slots), dtype=np.int64)
        starts: dict[int, float] = {}
        failing: list[tuple[int, ...]] = []
        for telescope in np.unique(self.problem.telescope[taken]):
            mine = taken[self.problem.telescope[taken] == telescope]
            early, late = self.problem.earliest_mjd[mine], self.problem.latest_mjd[mine]
            for group in overlap_groups(early, late):
                found = self._group(tuple(sorted(int(k) for k in mine[group])))
                if isinstance(found, dict):
                    starts.update(found)
                else:
                    failing.append(found)
        return Fit(starts, tuple(failing))

    def _group(self, slots: tuple[int, ...]) -> dict[int, float] | tuple[int, ...]:
        if slots not in self._known:
            try:
                starts = sequence(self.problem, slots)
                self._known[slots] = starts if starts is not None else self._smallest(slots)
            except Undecided:
                self.undecided = True
                self._known[slots] = slots
        return self._known[slots]

    def _smallest(self, slots: tuple[int, ...]) -> tuple[int, ...]:
        """Drop looks one by one while the rest still fails: a set that fails, with every smaller one fitting."""
        failing = list(slots)
        for k in slots:
            rest = [j for j in failing if j != k]
            try:
                if rest and sequence(self.problem, rest, comfort=False) is None:
                    failing = rest
            except Undecided:
                continue  # the set stays larger than it need be
        return tuple(failing)


def sequence(problem: Problem, slots: Sequence[int], *, comfort: bool = True) -> dict[int, float] | None:
    """Return the start (MJD) of each look so that none overlap, or None when that cannot be.

    With ``comfort``, looks stand as near to their preferred moments as a small, deterministic effort finds (sum of
    displacements of their middles). A look with under 2 s of freedom keeps its earliest start exactly. Raises
    Undecided when neither the order search nor CP-SAT can tell within their effort.
    """
    index = np.asarray(slots, dtype=np.int64)
    if index.size == 0:
        return {}
    base = float(np.floor(problem.earliest_mjd[index].min()))
    early = (problem.earliest_mjd[index] - base) * DAY_SECONDS
    late = (problem.latest_mjd[index] - base) * DAY_SECONDS
    length = problem.minutes[index] * 60.0
    if np.any(late - early < length - SLACK_S):
        return None
    rigid = late - early - length < _RIGID_S
    late = np.where(rigid, early + length, late)
    if problem.best_mjd is None:
        wish = 0.5 * (early + late - length)
    else:
        wish = np.clip((problem.best_mjd[index] - base) * DAY_SECONDS - 0.5 * length, early, late - length)
    if _clear_of_one_another(wish, length):
        starts: Floats | None = wish
    elif any(True for _ in _broken(problem, index, np.ones(index.size), _NIGHT_OVER_MIN)):
        starts = None  # a window row is broken: no order can work
    else:
        starts = _some_order(early, late, length)
        if starts is not None and comfort:
            starts = _near_wishes(early, late, length, wish, starts)
    if starts is None:
        return None
    return {int(k): float(base + s / DAY_SECONDS) for k, s in zip(index, starts, strict=True)}


def _clear_of_one_another(start: Floats, length: Floats) -> bool:
    order = np.argsort(start, kind="stable")
    return bool(np.all(start[order][1:] >= (start + length)[order][:-1] - SLACK_S))


def _some_order(early: Floats, late: Floats, length: Floats) -> Floats | None:
    """Starts in seconds after the base, or None when no order works: exact either way."""
    simple = earliest_deadline_order(early, late, length)
    if simple is not None:
        return simple
    try:
        return earliest_order(early, late, length)
    except TooManyOrders:
        return _by_constraints(early, late, length, None, None, _SURE_EFFORT)


def _near_wishes(early: Floats, late: Floats, length: Floats, wish: Floats, starts: Floats) -> Floats:
    """Move the looks of a night that works towards their wishes; the night as it is when nothing better is found."""
    better = _by_constraints(early, late, length, wish, starts, _EFFORT)
    if better is None or np.abs(better - wish).sum() >= np.abs(starts - wish).sum():
        return starts
    return better


def _by_constraints(
    early: Floats, late: Floats, length: Floats, wish: Floats | None, hint: Floats | None, effort: float
) -> Floats | None:
    """Sequence by CP-SAT intervals in whole seconds; None when impossible or, with a wish, not found in time."""
    from ortools.sat.python import cp_model

    low = np.ceil(early - SLACK_S).astype(np.int64)
    ticks = np.ceil(length - SLACK_S).astype(np.int64)
    high = np.maximum(low, np.floor(late + SLACK_S).astype(np.int64) - ticks)
    rigid = late - early - length < _RIGID_S
    model = cp_model.CpModel()
    starts, intervals, moved = [], [], []
    ends_before = -1
    for i in np.argsort(early, kind="stable"):
        if rigid[i]:
            begin = int(np.floor(early[i] + SLACK_S))
            if 0 < ends_before - begin <= _RIGID_S:
                begin = ends_before  # neighbours that touch may share a second
            ends_before = int(np.ceil(early[i] + length[i] - SLACK_S))
            intervals.append(model.new_fixed_size_interval_var(begin, max(0, ends_before - begin), f"r{i}"))
            continue
        start = model.new_int_var(int(low[i]), int(high[i]), f"s{i}")
        starts.append((i, start))
        intervals.append(model.new_fixed_size_interval_var(start, int(ticks[i]), f"i{i}"))
        if wish is not None and hint is not None:
            away = model.new_int_var(0, int(high[i] - low[i]) + 1, f"d{i}")
            model.add_abs_equality(away, start - int(np.clip(round(float(wish[i])), low[i], high[i])))
            model.add_hint(start, int(np.clip(np.ceil(hint[i] - SLACK_S), low[i], high[i])))
            moved.append(away)
    model.add_no_overlap(intervals)
    if moved:
        model.minimize(sum(moved))
    solver = _solved(cp_model, model, effort, surely=wish is None)
    if solver is None:
        return None
    result = early.copy()
    for i, start in starts:
        result[i] = min(max(float(solver.value(start)), early[i]), late[i] - length[i])
    return result


def _solved(cp_model: Any, model: Any, effort: float, *, surely: bool) -> Any:
    """Run CP-SAT with one worker and deterministic effort; None when impossible or (not ``surely``) undecided."""
    solver = cp_model.CpSolver()
    solver.parameters.num_workers = 1
    solver.parameters.random_seed = 1
    solver.parameters.max_deterministic_time = effort
    status = solver.solve(model)
    if status in (cp_model.OPTIMAL, cp_model.FEASIBLE):
        return solver
    if status == cp_model.INFEASIBLE or not surely:
        return None
    if status == cp_model.UNKNOWN:
        raise Undecided
    raise PlanningError(f"the night sequencer ended with status {solver.status_name(status)}; report this problem")
