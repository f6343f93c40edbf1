"""Growing a set of looks by what it is expected to realise.

Expected information saturates with few very telling looks; what those looks are worth when some of them are lost does
not. The gain of one more look is therefore summed over clear and lost outcomes of the looks already taken, for all
candidates at once, with the same low-rank update of the information as the usual pricing.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from planner.prediction.information import gathered, information_after
from planner.records import Floats, Ints
from planner.schedule.pricing import TargetPricer, compact
from planner.schedule.utility import realised_utilities, value_of

EXACT_LOOKS = 4  # up to 2^4 outcomes are summed when candidates are compared; above that outcomes are sampled
SAMPLES = 16  # sampled outcomes: enough to rank candidates; the set itself is judged with all of them


class RealisedPricer(TargetPricer):
    """A pricer whose values are expected realised values. ``luck``: (outcomes, K_i), common random numbers."""

    def __init__(self, usual: TargetPricer, luck: Floats) -> None:
        self.luck = luck
        super().__init__(usual.part, usual.target, usual.kept, usual.spacing)

    def keep(self, kept: Ints) -> None:
        """Choose the local slots that may be taken."""
        super().keep(kept)
        self._whole = compact(self.part.rows[:, self.kept])

    def value(self, chosen: Sequence[int]) -> float:
        """Expected realised value of a set above no looks."""
        key = tuple(chosen)
        if key not in self._values:
            self._values[key] = value_of(self.part, realised_utilities(self.part, key, self.luck), self.start)
        return self._values[key]

    def outcomes(self, chosen: Ints) -> tuple[Floats, Floats]:
        """Clear (1) or lost (0) looks of a set, (O, n), and the share of each outcome, (O,)."""
        chance = self.part.chance[chosen]
        if chosen.size <= EXACT_LOOKS:
            clear = ((np.arange(2**chosen.size)[:, None] >> np.arange(chosen.size)[None, :]) & 1).astype(float)
            return clear, np.prod(np.where(clear == 1.0, chance, 1.0 - chance), axis=1)
        step = max(1, self.luck.shape[0] // SAMPLES)
        clear = (self.luck[::step, chosen] < chance).astype(float)
        return clear, np.full(len(clear), 1.0 / len(clear))

    def values_after(self, chosen: Sequence[int], candidates: Ints) -> Floats:
        """Realised value of ``chosen`` plus each candidate alone, (n,); ``candidates`` number the kept slots."""
        index = np.asarray(chosen, dtype=np.int64)
        gain = np.zeros(candidates.size)
        if candidates.size == 0:
            return gain
        none = np.zeros((self.part.rows.shape[0], 1, 1, self.part.prior_precision.shape[0]))
        rows = self._whole[:, candidates]
        pad = np.broadcast_to(np.zeros_like(none), (none.shape[0], 1, rows.shape[2], none.shape[3]))
        tried = np.concatenate([pad, rows], axis=1)  # the first one adds nothing: the value without a candidate
        for clear, share in zip(*self.outcomes(index), strict=True):
            if share <= 0.0:
                continue
            if self._learn:
                matrix = gathered(self.part.prior_precision, self.part.rows[:, index], clear)
                after = information_after(matrix, self._gradients, tried) / self._wanted[:, :, None]
                reached = self._learn_weights @ np.minimum(1.0, after).mean(axis=1)
                gain += share * (reached[1:] - reached[0])
            for goal in self._count:
                here = goal.usable[:, index] @ clear
                more = here[:, None] + goal.usable[:, self.kept[candidates]]
                before = np.minimum(1.0, here / goal.wanted).mean()
                gain += share * goal.weight * (np.minimum(1.0, more / goal.wanted).mean(axis=0) - before)
        return self.value(chosen) + self.part.chance[self.kept[candidates]] * gain
