"""Exact search for an order of looks on one telescope.

Dynamic programme over sets of looks already done: for each set only the earliest possible end matters. A look may
come next only when every look that could not follow it is done, so looks whose windows lie apart cost nothing and
long chains with little overlap (an array's season) stay small.
"""

from __future__ import annotations

import numpy as np

from planner.records import Floats

STATES = 20_000  # sets of looks kept in one layer; about a tenth of a second. Real nights need some tens
SLACK_S = 0.01  # round-off of times read from text and turned to MJD and back is ~1e-6 s


class TooManyOrders(Exception):
    """The search outgrew `STATES`; the caller has another way."""


def earliest_deadline_order(early_s: Floats, late_s: Floats, length_s: Floats) -> Floats | None:
    """Return starts, (n,), found by always taking, of the looks that may start, the one that must end first.

    None says nothing: another order may work. Arguments as for `earliest_order`.
    """
    left = list(range(early_s.size))
    starts, clock = np.empty(early_s.size), -np.inf
    while left:
        now = max(clock, min(float(early_s[j]) for j in left))
        j = min((j for j in left if early_s[j] <= now), key=lambda j: (float(late_s[j]), j))
        if now + length_s[j] > late_s[j] + SLACK_S:
            return None
        starts[j] = now
        clock = now + float(length_s[j])
        left.remove(j)
    return np.minimum(starts, np.maximum(early_s, late_s - length_s))  # give the slack back


def earliest_order(early_s: Floats, late_s: Floats, length_s: Floats) -> Floats | None:
    """Return starts, (n,), of looks one after the other, each inside its window, or None when there is no order.

    ``early_s``, ``late_s``: earliest start and latest end, ``length_s``: length, all (n,) in seconds. Every look
    starts as early as its place in the order allows. Raises TooManyOrders when the search grows too large.
    """
    count = early_s.size
    early, late, length = early_s.tolist(), (late_s + SLACK_S).tolist(), length_s.tolist()
    first = [_cannot_follow(j, early, late, length) for j in range(count)]
    layer: dict[int, float] = {0: -np.inf}
    came_from: dict[int, tuple[int, int, float]] = {}  # set -> (set before, look added, its start)
    for _ in range(count):
        following: dict[int, float] = {}
        for done, clock in layer.items():
            for j in _next(done, clock, count, early, late, length, first):
                start = max(clock, early[j])
                both = done | 1 << j
                if start + length[j] < following.get(both, np.inf):
                    following[both] = start + length[j]
                    came_from[both] = (done, j, start)
        if len(following) > STATES:
            raise TooManyOrders
        layer = following
    if not layer:
        return None
    starts, done = np.empty(count), (1 << count) - 1
    while done:
        done, j, starts_at = came_from[done]
        starts[j] = starts_at
    return np.minimum(starts, np.maximum(early_s, late_s - length_s))  # give the slack back


def _cannot_follow(j: int, early: list[float], late: list[float], length: list[float]) -> int:
    """Looks that would end too late if they came after look ``j``, as bits."""
    end = early[j] + length[j]
    return sum(1 << i for i in range(len(early)) if i != j and end + length[i] > late[i])


def _next(
    done: int, clock: float, count: int, early: list[float], late: list[float], length: list[float], first: list[int]
) -> list[int]:
    """Looks that may come next; none at all when some look can no longer be done."""
    found = []
    for j in range(count):
        if done >> j & 1:
            continue
        if max(clock, early[j]) + length[j] > late[j]:
            return []
        if first[j] & ~done == 0:
            found.append(j)
    return found
