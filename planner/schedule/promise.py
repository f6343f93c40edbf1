"""What a chosen set of looks promises: odds over weather and belief, precision of each goal, data against prior."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Campaign, LearnGoal, LooksGoal
from planner.prediction.information import gathered, information
from planner.prediction.look import look_errors
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.quantities import wanted
from planner.records import Belief, Floats, GoalResult, Ints, Slot, Windows
from planner.schedule.odds import GoalOdds, simulate_odds
from planner.schedule.problem import CountPart, GoalPart, LearnPart, TargetPart
from planner.schedule.slots import SlotBook, _Batch, camera_sky, learn_part
from planner.schedule.weather import simulate_weather

SEASONS = 1000  # simulated seasons: standard error of odds near one half is 1.6 %
REACH_DRAWS = 64  # standard error of a share 6 % at most: enough to say that a goal is out of reach
WIDENED = 10.0  # the prior of a goal is widened this much to see how much of the precision is data


@dataclass(frozen=True)
class Chosen:
    """Looks of one target that the plan takes: local slot numbers and middles of the looks."""

    local: Ints
    middle_mjd: Floats


def odds_part(
    model: TargetModel, book: SlotBook, part: TargetPart, chosen: Chosen, draws: Floats, windows: Windows,
    campaign: Campaign,
) -> TargetPart:  # fmt: skip
    """Return the part of a target at fresh ``draws`` (N, P), holding only the chosen looks, at their own times."""
    keep = book.columns[model.target.name]
    count = len(chosen.local)
    observables = sum(len(f.observables) for f in model.features)
    rows = np.zeros((len(draws), count, observables, len(keep)))
    usable = np.zeros((len(draws), count, len(model.features)))
    slots = [book.slots[int(part.slots[i])] for i in chosen.local]
    for name in sorted({slot.setup for slot in slots}):
        which = np.array([i for i, slot in enumerate(slots) if slot.setup == name])
        batch = _batch_of(campaign, book, windows, [slots[i] for i in which], chosen.middle_mjd[which])
        errors = look_errors(
            model, draws, batch.mjd, batch.setup, sky=batch.sky, seconds=batch.seconds,
            track=windows.tracks.get((model.target.name, name)),
        )  # fmt: skip
        rows[:, which] = errors.whiten(model.derivatives(draws, batch.mjd, name))[..., keep]
        usable[:, which] = errors.measurable
    goals: list[GoalPart] = []
    for (feature, goal), planned in zip(book.goals[model.target.name], part.goals, strict=True):
        if isinstance(goal, LooksGoal):
            goals.append(
                CountPart(planned.name, planned.weight, usable[:, :, model.features.index(feature)], float(goal.looks))
            )
        else:
            fresh = learn_part(model, feature, goal, planned.weight, draws)
            goals.append(LearnPart(fresh.name, fresh.weight, fresh.gradient[:, keep], fresh.wanted))
    return TargetPart(
        name=part.name, prior_precision=part.prior_precision, goals=tuple(goals), slots=part.slots[chosen.local],
        chance=part.chance[chosen.local], rows=rows, middle_mjd=part.middle_mjd[chosen.local],
        at_least_days=part.at_least_days, at_most_days=part.at_most_days, forced=part.forced[chosen.local],
    )  # fmt: skip


def _batch_of(
    campaign: Campaign, book: SlotBook, windows: Windows, slots: Sequence[Slot], middle_mjd: Floats
) -> _Batch:
    setup = campaign.setup(slots[0].setup)
    rows = book.window_rows[[slot.number for slot in slots]]
    sky = None if setup.is_array else camera_sky(setup.site, setup, windows, rows)  # type: ignore[arg-type]
    seconds = np.array([slot.mode.exposure_s for slot in slots])
    minutes = np.array([slot.mode.minutes for slot in slots])
    return _Batch(setup, rows, middle_mjd, seconds, minutes, sky)


def clear_seasons(
    campaign: Campaign, windows: Windows, seed: np.random.SeedSequence, seasons: int
) -> dict[str, np.ndarray]:
    """Simulated clear nights of every site, (seasons, nights) each; sites have weather of their own."""
    found = {}
    for child, (slug, site) in zip(seed.spawn(len(campaign.sites)), sorted(campaign.sites.items()), strict=True):
        months = np.array([int(night[5:7]) for night in windows.nights])
        clear = np.array(site.months.clear)[months - 1]
        found[slug] = simulate_weather(clear, site.months.persistence, seasons, np.random.default_rng(child))
    return found


def season_odds(
    campaign: Campaign, models: Mapping[str, TargetModel], book: SlotBook, windows: Windows,
    chosen: Mapping[str, Chosen], seed: np.random.SeedSequence, seasons: int = SEASONS,
) -> dict[str, tuple[GoalOdds, ...]]:  # fmt: skip
    """Odds of every goal: each season draws its weather and its truth (a fresh draw of the belief)."""
    weather_seed, rng_seed = seed.spawn(2)
    clear = clear_seasons(campaign, windows, weather_seed, seasons)
    found = {}
    for i, part in enumerate(book.problem.targets):
        model = models[part.name]
        draws = model.belief(seasons, campaign.file.seed, "odds").draws
        fresh = odds_part(model, book, part, chosen[part.name], draws, windows, campaign)
        slots = [book.slots[int(k)] for k in fresh.slots]
        luck = [clear[campaign.setup(s.setup).site_slug][:, s.night_index] for s in slots]
        success = np.stack(luck, axis=1) if luck else np.zeros((seasons, 0), bool)
        rng = np.random.default_rng([*rng_seed.generate_state(2).tolist(), i])
        found[part.name] = simulate_odds(fresh, success, rng)
    return found


@dataclass(frozen=True)
class Reach:
    """What every slot of the season together could do for the goals of a target, all nights clear."""

    typical: Floats  # (G,) median standard deviation over draws, or mean number of usable looks
    share: Floats  # (G,) share of draws that reach the goal


def season_reach(campaign: Campaign, model: TargetModel, book: SlotBook, part: TargetPart, windows: Windows) -> Reach:
    """Take every slot at once, limits and weather ignored, at draws of their own."""
    local: Ints = np.arange(len(part.slots), dtype=np.int64)
    middles = np.array([book.slots[int(k)].best_mjd for k in part.slots], dtype=float)
    draws = model.belief(REACH_DRAWS, campaign.file.seed, "reach").draws
    whole = odds_part(model, book, part, Chosen(local, middles), draws, windows, campaign)
    matrix = gathered(whole.prior_precision, whole.rows, np.ones(len(local)))
    typical, share = [], []
    for goal in whole.goals:
        if isinstance(goal, CountPart):
            counts = goal.usable.sum(axis=1)
            typical.append(float(counts.mean()))
            share.append(float((counts >= goal.wanted).mean()))
        else:
            told = information(matrix, goal.gradient)
            typical.append(float(np.median(1.0 / np.sqrt(told))))
            share.append(float((told >= goal.wanted).mean()))
    return Reach(np.array(typical), np.array(share))


def prior_sigma(model: TargetModel, feature: FeatureModel, goal: LearnGoal, belief: Belief) -> float:
    """Half the 16-84 % width now, in the goal's unit (percent goals: of the logarithm, in percent)."""
    what = wanted(model, feature, goal)
    values = what.value(model, belief.draws)
    low, high = np.nanquantile(values, [0.16, 0.84])
    return float((high - low) / 2) * (100.0 if what.of_logarithm else 1.0)


def data_share(part: TargetPart, goal: LearnPart, chosen: Ints) -> float:
    """Share of a goal's information that comes from the looks and not from the prior of what it asks for.

    The prior of the coordinates that the goal speaks of is widened tenfold; information that is all data does
    not notice, information that is all prior falls to one hundredth.
    """
    spoken = np.abs(goal.gradient).max(axis=0) > 0
    scale = np.where(spoken, WIDENED, 1.0)
    covariance = np.linalg.inv(part.prior_precision)
    wide = np.linalg.inv(covariance * scale[:, None] * scale[None, :])
    taken = part.chance[chosen]
    told = information(gathered(part.prior_precision, part.rows[:, chosen], taken), goal.gradient)
    free = information(gathered(wide, part.rows[:, chosen], taken), goal.gradient)
    share = (np.median(free / told) - WIDENED**-2) / (1.0 - WIDENED**-2)
    return float(np.clip(share, 0.0, 1.0))


def goal_results(
    models: Mapping[str, TargetModel], beliefs: Mapping[str, Belief], book: SlotBook, chosen: Mapping[str, Chosen],
    odds: Mapping[str, tuple[GoalOdds, ...]], utilities: Mapping[str, Floats],
    reach: Mapping[str, Reach],
) -> tuple[GoalResult, ...]:  # fmt: skip
    """One result per goal, in the order of the campaign."""
    found = []
    for part in book.problem.targets:
        model = models[part.name]
        for g, ((feature, goal), planned) in enumerate(zip(book.goals[part.name], part.goals, strict=True)):
            luck, utility = odds[part.name][g], float(utilities[part.name][g])
            if isinstance(goal, LooksGoal) or isinstance(planned, CountPart):
                assert isinstance(goal, LooksGoal)
                best = float(reach[part.name].typical[g])
                remark = (
                    "" if best >= goal.looks else f"even every slot of the season gives only {best:.1f} usable epochs"
                )
                found.append(GoalResult(
                    part.name, feature.name, f"{goal.looks} usable epochs", float(goal.looks), "epochs", 0.0,
                    luck.typical, best, luck.odds, luck.odds_error, goal.odds, utility, 1.0, remark,
                ))  # fmt: skip
                continue
            percent = goal.to.unit == "%"
            scale = 100.0 if percent else 1.0
            best = float(reach[part.name].typical[g]) * scale
            found.append(GoalResult(
                part.name, feature.name, goal.words, goal.to.value, goal.to.unit,
                prior_sigma(model, feature, goal, beliefs[part.name]), luck.typical * scale, best, luck.odds,
                luck.odds_error, goal.odds, utility, data_share(part, planned, chosen[part.name].local),
                unreachable(goal, feature, best, float(reach[part.name].share[g])),
            ))  # fmt: skip
    return tuple(found)


def unreachable(goal: LearnGoal, feature: FeatureModel, best: float, share: float) -> str:
    """What to say when all slots of the season together do not reach a goal often enough; empty when they do."""
    if share >= goal.odds:
        return ""
    if share > 0:
        text = (
            f"every slot of the season together reaches {goal.to} in only {100 * share:.0f} % of draws "
            f"(typically {best:.3g} {goal.to.unit})"
        ).replace(" )", ")")
    else:
        text = f"nothing you can schedule reaches {goal.to}: every slot of the season together gives {best:.3g}"
        text += f" {goal.to.unit}" if goal.to.unit else ""
    if feature.kind == "ring" and goal.learn in ("depth_pc", "distance_pc"):
        return text + "; ring radii leave depth and distance tied: ask for depth_over_distance2, or bring a distance"
    if feature.kind == "pair" and goal.learn in ("angle_deg", "beta"):
        return text + "; both rates leave speed and angle tied to the distance: ask for beta_cos, or bring a distance"
    return text + "; ask for less, start earlier, or add a setup with a finer image"
