"""The planning problem, integer-indexed and immutable: all that the solver sees.

B draws to plan with, K_i slots of target i, P_i parameters of target i, M_i whitened rows a slot (every observable
of every feature in the field), K slots in all, A allocations.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from planner.records import Bools, Floats, Ints, lock

_SLACK_DAYS = 1e-9  # 0.1 ms: MJD round-off


@dataclass(frozen=True)
class LearnPart:
    """A precision goal: u = mean over draws of min(1, I_b / wanted_b), I = 1 / (c' F^-1 c)."""

    name: str
    weight: float
    gradient: Floats  # (B, P) c of the quantity (of its logarithm for a percent goal) at each draw
    wanted: Floats  # (B,) information wanted, 1 / (one standard deviation)^2

    def __post_init__(self) -> None:
        lock(self)


@dataclass(frozen=True)
class CountPart:
    """A goal of usable looks: u = mean over draws of min(1, sum p m x / wanted)."""

    name: str
    weight: float
    usable: Floats  # (B, K_i) 1 where the feature is measurable in that draw and slot, else 0
    wanted: float

    def __post_init__(self) -> None:
        lock(self)


GoalPart = LearnPart | CountPart


@dataclass(frozen=True)
class TargetPart:
    """Everything that concerns one target.

    ``rows[b, k]`` are whitened derivatives C^-1/2 J, (M, P), with zero rows for what is not measurable in draw b;
    a look that succeeds adds rows' rows to the information matrix, which starts at ``prior_precision``.
    """

    name: str
    prior_precision: Floats  # (P, P)
    goals: tuple[GoalPart, ...]
    slots: Ints  # (K_i,) global slot numbers, sorted by middle_mjd
    chance: Floats  # (K_i,) of weather and equipment
    rows: Floats  # (B, K_i, M, P)
    middle_mjd: Floats  # (K_i,) time of each slot, for the spacing rules
    at_least_days: float  # smallest time between two looks
    at_most_days: float  # largest time between neighbouring looks; inf if none. Two looks further apart are
    # allowed only when no slot of the target lies between them that keeps both smallest spacings
    forced: Bools  # (K_i,) fixed looks: always taken (never count against each other's spacing)

    def __post_init__(self) -> None:
        lock(self)


@dataclass(frozen=True)
class Problem:
    """All targets and what they share."""

    targets: tuple[TargetPart, ...]
    owner: Ints  # (K,) target of each slot
    allocation: Ints  # (K,) which account pays
    telescope: Ints  # (K,) which telescope is busy
    night: Ints  # (K,) night index, a label only: whether two looks can collide on a telescope is decided by
    # their times, since the labels of an array's transits or of a polar night may differ while the times overlap
    minutes: Floats  # (K,) of the telescope
    charge: Floats  # (K,) minutes charged to the allocation
    earliest_mjd: Floats  # (K,) earliest start
    latest_mjd: Floats  # (K,) latest end
    limits: Floats  # (A,) minutes granted by each allocation
    best_mjd: Floats | None = None  # (K,) moment the middle of each look is best at; None: middle of its window

    def __post_init__(self) -> None:
        lock(self)

    def name(self, slot: int) -> str:
        """Words for one slot in messages."""
        return f"{self.targets[int(self.owner[slot])].name} (slot {slot})"

    @property
    def size(self) -> int:
        """Number of slots."""
        return int(self.owner.size)


def gap_conflicts(part: TargetPart) -> Bools:
    """Return (K_i, K_i), True where two slots of a target are closer than its smallest spacing.

    Fixed looks do not exclude one another; a slot always excludes itself nowhere (diagonal False).
    """
    apart = np.abs(part.middle_mjd[:, None] - part.middle_mjd[None, :])
    clash = apart < part.at_least_days - _SLACK_DAYS
    clash &= ~(part.forced[:, None] & part.forced[None, :])
    np.fill_diagonal(clash, False)
    return clash


@dataclass(frozen=True)
class Spacing:
    """The spacing rules of one target, ready for questions about sets of its slots."""

    middle_mjd: Floats  # (K_i,) ascending
    forced: Bools  # (K_i,)
    clash: Bools  # (K_i, K_i) from `gap_conflicts`
    at_least_days: float
    at_most_days: float

    @classmethod
    def of(cls, part: TargetPart) -> Spacing:
        """Read the rules of a target."""
        if np.any(np.diff(part.middle_mjd) < 0.0):
            raise ValueError(f"{part.name}: slots must be sorted by middle_mjd")
        return cls(part.middle_mjd, part.forced, gap_conflicts(part), part.at_least_days, part.at_most_days)

    def neighbours_kept(self, left_mjd: Floats, right_mjd: Floats) -> Bools:
        """True where two neighbouring looks are near enough, or nothing could stand between them."""
        near = right_mjd - left_mjd <= self.at_most_days + _SLACK_DAYS
        if np.all(near):
            return np.asarray(near)
        step = max(self.at_least_days - _SLACK_DAYS, _SLACK_DAYS)
        first = np.searchsorted(self.middle_mjd, left_mjd + step, side="left")
        after = np.searchsorted(self.middle_mjd, right_mjd - step, side="right")
        return np.asarray(near | (after <= first))

    def kept(self, chosen: Sequence[int] | Ints) -> bool:
        """True when a set of slots keeps the smallest and the largest spacing.

        Two neighbouring fixed looks are never held against each other.
        """
        index = np.sort(np.asarray(chosen, dtype=np.int64))
        if index.size < 2:
            return True
        if np.any(self.clash[np.ix_(index, index)]):
            return False
        if np.isinf(self.at_most_days):
            return True
        both = self.forced[index[:-1]] & self.forced[index[1:]]
        return bool(np.all(both | self.neighbours_kept(self.middle_mjd[index[:-1]], self.middle_mjd[index[1:]])))

    def may_join(self, chosen: Sequence[int] | Ints) -> Bools:
        """(K_i,) True for every slot that can be added alone to ``chosen`` without breaking a spacing rule."""
        index = np.sort(np.asarray(chosen, dtype=np.int64))
        allowed = np.ones(self.middle_mjd.size, dtype=bool)
        if index.size == 0:
            return allowed
        allowed &= ~np.any(self.clash[index], axis=0)
        allowed[index] = False
        if np.isinf(self.at_most_days):
            return allowed
        moments = self.middle_mjd[index]
        place = np.searchsorted(moments, self.middle_mjd, side="right")
        left = np.concatenate(([-np.inf], moments))[place]
        right = np.concatenate((moments, [np.inf]))[place]
        has_left, has_right = np.isfinite(left), np.isfinite(right)
        allowed &= ~has_left | self.neighbours_kept(np.where(has_left, left, self.middle_mjd), self.middle_mjd)
        allowed &= ~has_right | self.neighbours_kept(self.middle_mjd, np.where(has_right, right, self.middle_mjd))
        return allowed
