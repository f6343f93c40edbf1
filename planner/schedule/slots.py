"""From forecast, windows and instruments to slots, and from slots to the integer-indexed planning problem."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace

import numpy as np

from planner.campaign.records import Allocation, Campaign, FixedLook, LearnGoal, LooksGoal, SetupRef, Target
from planner.errors import PlanningError
from planner.prediction.knots import KnotModel
from planner.prediction.look import LookErrors
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.quantities import wanted
from planner.records import SKY_CLASSES, Floats, Ints, Slot, Windows
from planner.schedule.candidates import (
    Batch,
    batches,
    errors_of,
    good_share,
    in_any_band,
    lasting,
    mode_of,
    offers,
    taught,
)
from planner.schedule.problem import CountPart, GoalPart, LearnPart, Problem, TargetPart
from planner.units import mjd_of_date, mjd_of_iso

LEAST_CHANCE = 0.02  # a slot that could measure something in fewer draws than this is left out
CHANCE_DRAWS = 256  # draws for the minutes and the chances of a slot (standard error of a chance: 3 %)
LEAST_OF_MODES_DAYS = 0.5  # spacing counts whole nights: any number up to 1 keeps looks on different nights
_ALLOWED = {"dark": 0, "grey": 1, "any": 2}  # darkest class code that an allocation accepts


@dataclass
class Losses:
    """Why windows of a target did not become slots, in nights."""

    setups: int = 0
    windows: int = 0
    sky: int = 0  # no allocation accepts the sky class
    short: int = 0  # window shorter than the look
    unmeasurable: int = 0
    reasons: dict[str, float] = field(default_factory=dict)  # what stops a measurement -> share of draws and nights
    slots: int = 0


@dataclass(frozen=True)
class SlotBook:
    """All slots with the problem made of them, and what was lost on the way."""

    slots: tuple[Slot, ...]
    problem: Problem
    losses: Mapping[str, Losses]
    window_rows: Ints  # (K,) row of ``Windows`` that each slot lies in
    columns: Mapping[str, Ints]  # coordinates of each target that the problem's parts keep
    goals: Mapping[str, tuple[tuple[FeatureModel, LearnGoal | LooksGoal], ...]]


@dataclass(frozen=True)
class _Found:
    """A slot on its way into the book: its window row, whitened derivatives (B, M, P) and usable features (B, F)."""

    slot: Slot
    window_row: int
    rows: Floats
    usable: Floats
    forced: bool = False


class SlotBuilder:
    """Collects the slots of every target, then freezes them into a problem."""

    def __init__(self, campaign: Campaign, windows: Windows) -> None:
        self.campaign, self.windows = campaign, windows
        self.slots: list[Slot] = []
        self.window_rows: list[int] = []
        self.parts: list[TargetPart] = []
        self.losses: dict[str, Losses] = {}
        self.columns: dict[str, Ints] = {}
        self.goals: dict[str, tuple[tuple[FeatureModel, LearnGoal | LooksGoal], ...]] = {}

    # -------------------------------------------------------------- one target

    def add(self, model: TargetModel, plan_draws: Floats, chance_draws: Floats) -> None:
        """Add a target: its slots, their whitened derivatives at ``plan_draws`` (B, P), its goals."""
        target = model.target
        loss = self.losses[target.name] = Losses()
        programme = self.campaign.programme_of(target).name
        found: list[_Found] = []
        for a, allocation in enumerate(self.campaign.file.allocations):
            if allocation.programme == programme:
                found += self._of_allocation(model, a, allocation, plan_draws, chance_draws, loss)
        for number, look in enumerate(self.campaign.file.fixed_looks):
            if look.target == target.name:
                found.append(self._fixed(model, number, look, plan_draws, chance_draws))
        found.sort(key=lambda item: (item.slot.night, item.slot.best_mjd, item.slot.setup, item.slot.allocation))
        first = len(self.slots)
        self.slots += [replace(item.slot, number=first + i) for i, item in enumerate(found)]
        self.window_rows += [item.window_row for item in found]
        loss.slots = len(found)
        self.parts.append(self._part(model, found, plan_draws, first))

    def _of_allocation(
        self, model: TargetModel, a: int, allocation: Allocation, plan_draws: Floats, chance_draws: Floats, loss: Losses
    ) -> list[_Found]:
        windows, setup = self.windows, self.campaign.setup(allocation.setup)
        if setup.name not in windows.setups:
            return []
        rows = windows.rows(model.target.name, setup.name)
        loss.setups += 1
        loss.windows += len(np.unique(windows.night[rows]))
        allowed = rows[windows.sky_class[rows] <= _ALLOWED[allocation.sky]]
        loss.sky += len(np.unique(windows.night[rows])) - len(np.unique(windows.night[allowed]))
        if not len(allowed):
            return []
        long_enough: set[int] = set()
        measured: set[int] = set()
        found: list[_Found] = []
        for batch in offers(batches(model, setup, windows, allowed, chance_draws)):
            wide = errors_of(model, chance_draws, batch)
            chance = in_any_band(model, chance_draws, batch, wide).any(axis=-1).mean(axis=0)
            for block in wide.blocked:
                loss.reasons[f"{block.feature}: {block.reason}"] = float(block.mask.mean())
            good = np.flatnonzero(chance >= LEAST_CHANCE)
            long_enough |= set(batch.nights.tolist())
            measured |= set(batch.nights[good].tolist())
            if len(good):
                found += self._slots(model, a, setup, batch.at(good), chance[good], _best_snr(wide)[good], plan_draws)
        loss.short += len(np.unique(windows.night[allowed])) - len(long_enough)
        loss.unmeasurable += len(long_enough) - len(measured)
        return found

    def _slots(
        self,
        model: TargetModel,
        a: int,
        setup: SetupRef,
        batch: Batch,
        chance: Floats,
        snr: Floats,
        plan_draws: Floats,
    ) -> list[_Found]:
        w = self.windows
        what = taught(model, plan_draws, batch)
        rows, usable = what.rows, what.measurable.astype(float)  # (B, T, M, P), (B, T, F)
        stations = 1.0 if batch.track is None else batch.track.chance_stations
        found = []
        for i, row in enumerate(batch.rows):
            slot = Slot(
                number=-1, target=model.target.name, setup=setup.name, telescope=setup.telescope,
                night=w.nights[w.night[row]], night_index=int(w.night[row]), allocation=a,
                mode=mode_of(setup, float(batch.seconds[i]), float(batch.minutes[i]), batch.share),
                earliest_start_mjd=float(batch.earliest_mjd[i]), latest_end_mjd=float(batch.latest_mjd[i]),
                best_mjd=float(batch.mjd[i]), chance_stations=stations,
                chance_clear=good_share(setup, w.nights[w.night[row]]) * stations, chance_measurable=float(chance[i]),
                expected_snr=float(snr[i]), airmass=float(w.airmass[row]),
                moon_separation_deg=float(w.moon_separation_deg[row]), sky_class=int(w.sky_class[row]),
            )  # fmt: skip
            found.append(_Found(slot, int(row), rows[:, i], usable[:, i]))
        return found

    def _fixed(
        self, model: TargetModel, number: int, look: FixedLook, plan_draws: Floats, chance_draws: Floats
    ) -> _Found:
        """Return the slot of a look already promised: same models, its own start and minutes."""
        w, setup = self.windows, self.campaign.setup(look.setup)
        start = mjd_of_iso(look.start_utc.isoformat())
        end = start + look.minutes / 1440.0
        rows = w.rows(look.target, look.setup)
        inside = rows[(w.start_mjd[rows] <= start + 1e-6) & (w.end_mjd[rows] >= end - 1e-6)]
        where = f"fixed look {number + 1} ({look.target} with {look.setup} at {look.start_utc:%Y-%m-%d %H:%M} UTC)"
        if not len(inside):
            near = rows[np.argsort(np.abs(w.best_mjd[rows] - start))[:1]]
            hint = (
                f"; the nearest window is on {w.nights[w.night[near[0]]]}" if len(near) else "; it has no window at all"
            )
            raise PlanningError(f"{where} lies in no window of {look.minutes:g} minutes{hint}; move it or drop it")
        accounts = [
            i for i, al in enumerate(self.campaign.file.allocations)
            if al.setup == look.setup and al.programme == self.campaign.programme_of(model.target).name
            and w.sky_class[inside[0]] <= _ALLOWED[al.sky]
        ]  # fmt: skip
        if not accounts:
            raise PlanningError(f"{where}: no allocation accepts a {SKY_CLASSES[w.sky_class[inside[0]]]} sky there")
        offered = [b for b in batches(model, setup, w, inside[:1], chance_draws) if len(b.rows)]
        batch = min(offered, key=lambda b: abs(float(b.minutes[0]) - look.minutes))
        batch = lasting(model.target, replace(batch, mjd=np.array([(start + end) / 2])), look.minutes)
        wide = errors_of(model, chance_draws, batch)
        chance = in_any_band(model, chance_draws, batch, wide).any(axis=-1).mean(axis=0)
        (found,) = self._slots(model, accounts[0], setup, batch, chance, _best_snr(wide), plan_draws)
        slot = replace(
            found.slot, earliest_start_mjd=start, latest_end_mjd=end, best_mjd=(start + end) / 2, fixed_look=number
        )
        return replace(found, slot=slot, forced=True)

    # -------------------------------------------------------------- the target's part

    def _part(self, model: TargetModel, found: list[_Found], plan_draws: Floats, first: int) -> TargetPart:
        draws, count = len(plan_draws), len(found)
        observables = sum(len(f.observables) for f in model.features)
        if found:
            rows = np.stack(padded([item.rows for item in found]), axis=1)
            usable = np.stack([item.usable for item in found], axis=1)  # (B, K, F)
        else:
            rows = np.zeros((draws, 0, observables, model.size))
            usable = np.zeros((draws, 0, len(model.features)))
        goals = self._goals(model, plan_draws, usable)
        covariance = model.belief_covariance
        keep = kept_columns(rows, [g for g in goals if isinstance(g, LearnPart)])
        self.columns[model.target.name] = keep
        goals = tuple(
            LearnPart(g.name, g.weight, g.gradient[:, keep], g.wanted) if isinstance(g, LearnPart) else g for g in goals
        )
        # modes of one night are alternatives, even where looks may follow one another within a night
        at_least = model.target.spacing.at_least_days
        if any(item.slot.mode.share != 1.0 and not item.forced for item in found):
            at_least = max(at_least, LEAST_OF_MODES_DAYS)
        return TargetPart(
            name=model.target.name,
            prior_precision=np.asarray(np.linalg.inv(covariance[np.ix_(keep, keep)]), dtype=np.float64),
            goals=goals,
            slots=np.arange(first, first + count),
            chance=np.array([item.slot.chance_clear for item in found], dtype=float),
            rows=np.ascontiguousarray(rows[..., keep]),
            middle_mjd=np.array([mjd_of_date(item.slot.night) for item in found], dtype=float),  # spacing counts nights
            at_least_days=at_least,
            at_most_days=largest_gap_days(model, plan_draws),
            forced=np.array([item.forced for item in found], dtype=bool),
        )

    def _goals(self, model: TargetModel, plan_draws: Floats, usable: Floats) -> tuple[GoalPart, ...]:
        pairs = [(feature, goal) for feature in model.features for goal in feature.record.goals]
        self.goals[model.target.name] = tuple(pairs)
        shares = np.array([goal.weight or 1.0 for _, goal in pairs])
        weights = self.campaign.weight_of(model.target) * shares / max(shares.sum(), 1e-300)
        parts: list[GoalPart] = []
        for (feature, goal), weight in zip(pairs, weights, strict=True):
            index = model.features.index(feature)
            if isinstance(goal, LooksGoal):
                name = f"{feature.name}: {goal.looks} usable epochs"
                parts.append(CountPart(name, float(weight), usable[:, :, index], float(goal.looks)))
            else:
                parts.append(learn_part(model, feature, goal, float(weight), plan_draws))
        return tuple(parts)

    # -------------------------------------------------------------- the whole

    def freeze(self) -> SlotBook:
        """Freeze everything into an integer-indexed problem."""
        slots = self.slots
        telescopes = sorted({s.telescope for s in slots})
        owner = np.concatenate(
            [np.full(len(part.slots), i) for i, part in enumerate(self.parts)] or [np.zeros(0, int)]
        ).astype(np.int64)
        problem = Problem(
            targets=tuple(self.parts),
            owner=owner,
            allocation=np.array([s.allocation for s in slots], dtype=np.int64),
            telescope=np.array([telescopes.index(s.telescope) for s in slots], dtype=np.int64),
            night=np.array([s.night_index for s in slots], dtype=np.int64),
            minutes=np.array([s.mode.minutes for s in slots], dtype=float),
            charge=np.array([s.mode.minutes for s in slots], dtype=float),
            earliest_mjd=np.array([s.earliest_start_mjd for s in slots], dtype=float),
            latest_mjd=np.array([s.latest_end_mjd for s in slots], dtype=float),
            limits=np.array([a.hours * 60.0 for a in self.campaign.file.allocations], dtype=float),
            best_mjd=np.array([s.best_mjd for s in slots], dtype=float),
        )
        return SlotBook(
            tuple(slots), problem, self.losses, np.array(self.window_rows, dtype=np.int64), self.columns, self.goals
        )


def padded(rows: Sequence[Floats]) -> list[Floats]:
    """Rows (B, M, P) of looks brought to one M by rows of zeros, which teach nothing."""
    most = max(r.shape[1] for r in rows)
    return [np.pad(r, ((0, 0), (0, most - r.shape[1]), (0, 0))) if r.shape[1] < most else r for r in rows]


def learn_part(model: TargetModel, feature: FeatureModel, goal: LearnGoal, weight: float, draws: Floats) -> LearnPart:
    """Turn a learn goal into gradients (B, P) and wanted information (B,) at ``draws``.

    A draw in which the quantity does not exist (the logarithm of a negative number) takes the mean gradient of
    the others: it is neither reached for free nor impossible.
    """
    what = wanted(model, feature, goal)
    gradient = what.gradient(model, draws)
    bad = ~np.isfinite(gradient).all(axis=1)
    if bad.all():
        raise PlanningError(
            f"{model.target.name}: {goal.learn} of {feature.name} has no value in any draw of the belief; "
            "ask for another quantity or check the priors"
        )
    gradient[bad] = gradient[~bad].mean(axis=0)
    name = f"{feature.name}: {goal.words}"
    return LearnPart(name, weight, gradient, np.full(len(draws), what.sigma**-2))


def kept_columns(rows: Floats, goals: Sequence[LearnPart]) -> Ints:
    """Coordinates that some look or some goal feels; the others stay at their prior and are left out exactly."""
    felt = np.abs(rows).max(axis=(0, 1, 2), initial=0.0) if rows.size else np.zeros(rows.shape[-1])
    for goal in goals:
        felt = felt + np.abs(goal.gradient).max(axis=0)
    keep = np.flatnonzero(felt > 0)
    return keep if len(keep) else np.arange(min(1, rows.shape[-1]))


def largest_gap_days(model: TargetModel, draws: Floats) -> float:
    """Largest time between looks: the user's, and half a knot spacing of motion so that knots are not mixed up.

    Source: mu dt <= s / 2 with the knot spacing s (sampling theorem for moving knots), at the fast 84 % quantile.
    """
    gap = model.target.spacing.at_most_days or math.inf
    for feature in model.features:
        if isinstance(feature, KnotModel) and feature.record.neighbours is not None and not feature.stationary:
            fast = float(np.quantile(feature.speed_mas_yr(draws), 0.84)) / 365.25
            gap = min(gap, feature.record.neighbours.spacing_mas / (2.0 * fast))
    return max(gap, model.target.spacing.at_least_days + 1.0)


def _best_snr(errors: LookErrors) -> Floats:
    return np.median(errors.snr.max(axis=-1), axis=0)


def setup_targets(campaign: Campaign, target: Target) -> list[SetupRef]:
    """Setups on which a target's programme has time."""
    programme = campaign.programme_of(target).name
    names = {a.setup for a in campaign.file.allocations if a.programme == programme}
    return [s for s in campaign.setups if s.name in names]
