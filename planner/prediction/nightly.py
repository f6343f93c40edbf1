"""Yes-or-no facts on every night of a season from few nights: both ends alike means alike between.

What can be measured changes once or twice in a season in each draw, so it is judged on some nights and, where two
neighbouring ones differ, on every night between them, for the draws that differ. A change there and back between two
judged nights is missed; nights at which conditions jump (months, templates) are therefore judged themselves.
"""

from __future__ import annotations

import itertools
from collections.abc import Callable, Iterable

import numpy as np

from planner.records import Bools, Floats, Ints
from planner.units import date_of_mjd

STRIDE = 12  # nights between judged ones: tests/prediction compares with every night judged


def judged_nights(nights: int, jumps: Iterable[int] = ()) -> Ints:
    """Night numbers to judge: every ``STRIDE``-th, the last, and both sides of each night at which conditions jump."""
    chosen = {*range(0, nights, STRIDE), nights - 1}
    chosen |= {i for jump in jumps for i in (jump - 1, jump, jump + 1)}
    return np.array(sorted(i for i in chosen if 0 <= i < nights), dtype=np.int64)


def new_months(nights_mjd: Floats) -> Ints:
    """Numbers of the nights that are the first of a month."""
    months = np.array([date_of_mjd(mjd - 1.0).month for mjd in nights_mjd])
    return np.flatnonzero(np.diff(months)) + 1


def every_night(judge: Callable[[Ints, Ints], Bools], draws: int, judged: Ints, nights: int) -> Bools:
    """Fill (B, T, F) from ``judge(draw numbers (b,), night numbers (t,)) -> (b, t, F)``, called at most twice."""
    known = judge(np.arange(draws), judged)
    out = np.empty((draws, nights, known.shape[2]), dtype=bool)
    out[:, judged] = known
    changed = known[:, :-1] != known[:, 1:]  # (B, gaps, F)
    unsure: list[Ints] = []
    for k, (low, high) in enumerate(itertools.pairwise(judged)):
        if high - low < 2:
            continue
        between = np.arange(low + 1, high)
        out[:, between] = known[:, [k]]
        if changed[:, k].any():
            unsure.append(between)
    if unsure:  # one call for all of them: its cost is mostly that of being called
        differ, when = np.flatnonzero(changed.any(axis=(1, 2))), np.concatenate(unsure)
        out[np.ix_(differ, when)] = judge(differ, when)
    return out
