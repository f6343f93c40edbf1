"""Intervals in which every limit holds, from samples on an even grid, with edges good to a fraction of a second.

A limit is a margin: a function of time that is above 0 while the limit holds. On the grid only its sign counts;
each edge is then found on the cubic through the four samples around it (0.15 s at 5 minutes for a star's altitude,
1 ms for the Sun's). An extremum of the altitude between samples is looked at as well, so that a pass or a dip
shorter than the step is not lost.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from planner.records import Bools, Floats, Ints

Margin = Callable[..., Floats]


@dataclass(frozen=True)
class Limit:
    """One limit over N rows and T samples.

    ``samples``: quantities (N, T) or (1, T) that are smooth in time; ``margin`` turns their values (same order) into
    the margin. ``values``: the margin at every sample.
    """

    name: str
    samples: tuple[Floats, ...]
    margin: Margin
    values: Floats


def limit(name: str, margin: Margin, *samples: Floats) -> Limit:
    """Make a limit and evaluate its margin at every sample."""
    return Limit(name, samples, margin, margin(*samples))


def allowed_intervals(limits: Sequence[Limit], rows: int, count: int) -> tuple[Ints, Floats, Floats]:
    """Intervals where all margins are above 0: row (E,), start (E,), end (E,) in units of the grid step.

    Sorted by row, then start. Intervals that touch the ends of the grid end there.
    """
    ok = np.ones((rows, count), dtype=bool)
    for item in limits:
        ok &= item.values > 0.0
    edge = np.diff(ok.astype(np.int8), axis=1, prepend=0, append=0)
    row, first = np.nonzero(edge == 1)  # first sample inside
    _, after = np.nonzero(edge == -1)  # first sample outside again
    start, end = first.astype(np.float64), after.astype(np.float64) - 1.0
    inner = np.flatnonzero(first > 0)
    start[inner] = _refine(limits, row[inner], first[inner] - 1, outside_left=True)
    inner = np.flatnonzero(after < count)
    end[inner] = _refine(limits, row[inner], after[inner] - 1, outside_left=False)
    keep = end > start
    return row[keep].astype(np.int64), start[keep], end[keep]


def _refine(limits: Sequence[Limit], row: Ints, left: Ints, *, outside_left: bool) -> Floats:
    """Moment in [left, left + 1] at which all limits begin (or cease) to hold together."""
    out: Floats = np.asarray(left, dtype=np.float64) + (0.0 if outside_left else 1.0)
    bad = left if outside_left else left + 1
    for item in limits:
        here = np.flatnonzero(_take(item.values, row, bad) <= 0.0)
        if here.size == 0:
            continue
        root = _root(item, row[here], left[here])
        out[here] = np.maximum(out[here], root) if outside_left else np.minimum(out[here], root)
    return out


def _take(values: Floats, row: Ints, column: Ints) -> Floats:
    return values[row if values.shape[0] > 1 else np.zeros_like(row), column]


def _root(item: Limit, row: Ints, left: Ints) -> Floats:
    """Zero of the margin between samples ``left`` and ``left + 1`` (where its sign changes)."""
    count = item.values.shape[1]
    base = np.clip(left - 1, 0, max(0, count - 4))
    width = min(4, count)
    columns = base[:, None] + np.arange(width)
    stencils = [values[(row if values.shape[0] > 1 else 0 * row)[:, None], columns] for values in item.samples]

    def margin(x: Floats) -> Floats:
        weights = _weights(x - base, width)
        return item.margin(*((weights * s).sum(axis=1) for s in stencils))

    a: Floats = np.asarray(left, dtype=np.float64)
    b: Floats = a + 1.0
    return _false_position(margin, a, b, _take(item.values, row, left), _take(item.values, row, left + 1))


def _false_position(margin: Callable[[Floats], Floats], a: Floats, b: Floats, fa: Floats, fb: Floats) -> Floats:
    """Illinois false position for all brackets together, to 1e-6 of a step."""
    root = b
    for _ in range(14):
        slope = np.where(fb != fa, fb - fa, 1.0)
        root = np.clip(b - fb * (b - a) / slope, np.minimum(a, b), np.maximum(a, b))
        f = margin(root)
        other = (f > 0) != (fb > 0)
        a, fa = np.where(other, b, a), np.where(other, fb, 0.5 * fa)
        done = bool((np.abs(root - b) < 1e-6).all())
        b, fb = root, f
        if done:
            break
    return root


def _weights(x: Floats, width: int) -> Floats:
    """Lagrange weights (E, width) of samples 0..width-1 at x (E,)."""
    weights = np.ones((x.size, width))
    for k in range(width):
        for j in range(width):
            if j != k:
                weights[:, k] *= (x - j) / (k - j)
    return weights


def hidden_extrema(samples: Floats, threshold: Floats, *, passes: bool) -> tuple[Ints, Floats, Floats]:
    """Passes above (or dips below) a threshold that lie wholly between samples.

    samples, threshold: (N, T). Returns row, start, end (E,) in steps, from the parabola through three samples.
    """
    f = (samples - threshold) if passes else (threshold - samples)
    mid = f[:, 1:-1]
    row, at = np.nonzero((mid <= 0.0) & (mid >= f[:, :-2]) & (mid > f[:, 2:]))
    a, b, c = f[row, at], f[row, at + 1], f[row, at + 2]
    bend, slope = a - 2.0 * b + c, 0.5 * (c - a)
    ok = bend < 0.0
    row, at, b, bend, slope = row[ok], at[ok], b[ok], bend[ok], slope[ok]
    top = b - 0.5 * slope**2 / bend
    ok = top > 0.0
    middle = (at + 1 - slope / bend)[ok]
    half = np.sqrt(-2.0 * top[ok] / bend[ok])
    return row[ok].astype(np.int64), middle - half, middle + half


def add_passes(
    found: tuple[Ints, Floats, Floats], extra: tuple[Ints, Floats, Floats], other_limits: Sequence[Limit]
) -> tuple[Ints, Floats, Floats]:
    """Add short passes around which every other limit holds; sorted by row and start."""
    row, start, end = extra
    keep = np.ones(row.size, dtype=bool)
    for item in other_limits:
        for near in (np.floor(start), np.ceil(end)):
            keep &= _take(item.values, row, near.astype(np.int64)) > 0.0
    rows = np.concatenate([found[0], row[keep]])
    starts, ends = np.concatenate([found[1], start[keep]]), np.concatenate([found[2], end[keep]])
    order = np.lexsort((starts, rows))
    return rows[order], starts[order], ends[order]


def remove_dips(found: tuple[Ints, Floats, Floats], dips: tuple[Ints, Floats, Floats]) -> tuple[Ints, Floats, Floats]:
    """Cut short dips out of the intervals (dips are few, so a plain loop)."""
    row, start, end = found
    pieces = []
    for r, a, b in list(zip(*dips, strict=True))[::-1]:  # latest first: a piece cut off holds no earlier dip
        for k in np.flatnonzero((row == r) & (start < b) & (end > a)):
            pieces.append((r, b, end[k]))
            end = end.copy()
            end[k] = a
    if pieces:
        more = np.array(pieces)
        row = np.concatenate([row, more[:, 0].astype(np.int64)])
        start, end = np.concatenate([start, more[:, 1]]), np.concatenate([end, more[:, 2]])
    keep = end > start
    row, start, end = row[keep], start[keep], end[keep]
    order = np.lexsort((start, row))
    return row[order], start[order], end[order]


def split(row: Ints, start: Floats, end: Floats, cuts: Floats) -> tuple[Ints, Floats, Floats]:
    """Split intervals at every cut (sorted) that lies inside them."""
    first = np.searchsorted(cuts, start, side="right")
    last = np.searchsorted(cuts, end, side="left")
    pieces = last - first + 1
    owner = np.repeat(np.arange(row.size), pieces)
    number = np.arange(owner.size) - np.repeat(np.cumsum(pieces) - pieces, pieces)
    padded = np.concatenate([cuts, [np.nan]])
    a = np.where(number == 0, start[owner], padded[np.clip(first[owner] + number - 1, 0, cuts.size)])
    b = np.where(number == pieces[owner] - 1, end[owner], padded[np.clip(first[owner] + number, 0, cuts.size)])
    return row[owner], a, b


def midpoint_ok(values: Floats) -> Bools:
    """Whether a limit holds in the middle of each grid cell: margins of both ends averaged, (N, T - 1)."""
    return (values[:, :-1] + values[:, 1:]) > 0.0
