"""What a chosen set of looks promises: odds over weather and belief, precision of each goal, data against prior."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from planner.campaign.records import Campaign, LearnGoal, LooksGoal
from planner.prediction.arclets import ArcletModel
from planner.prediction.information import gathered, information
from planner.prediction.model import FeatureModel, TargetModel
from planner.prediction.quantities import wanted
from planner.prediction.rings import RingModel
from planner.records import Belief, Bools, Floats, GoalResult, Ints, Slot, Windows
from planner.schedule.candidates import Batch, bands_beside, camera_sky, mode_track, taught
from planner.schedule.odds import GoalOdds, simulate_odds
from planner.schedule.problem import CountPart, GoalPart, LearnPart, TargetPart
from planner.schedule.slots import SlotBook, learn_part
from planner.schedule.weather import nightly_shares, simulate_weather, weather_roots

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
    rows = np.zeros((len(draws), count, part.rows.shape[2], len(keep)))
    usable = np.zeros((len(draws), count, len(model.features)))
    slots = [book.slots[int(part.slots[i])] for i in chosen.local]
    for name, share in sorted({(slot.setup, slot.mode.share) for slot in slots}):
        which = np.array([i for i, slot in enumerate(slots) if (slot.setup, slot.mode.share) == (name, share)])
        batch = _batch_of(campaign, model, book, windows, [slots[i] for i in which], chosen.middle_mjd[which])
        what = taught(model, draws, batch)
        rows[:, which, : what.rows.shape[2]] = what.rows[..., keep]
        usable[:, which] = what.measurable
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
    campaign: Campaign, model: TargetModel, book: SlotBook, windows: Windows, slots: Sequence[Slot], middle_mjd: Floats
) -> Batch:
    """Chosen looks with one setup in one mode, at their own times."""
    setup, share = campaign.setup(slots[0].setup), slots[0].mode.share
    rows = book.window_rows[[slot.number for slot in slots]]
    track = mode_track(model.target, setup, windows, share) if setup.is_array else None
    return Batch(
        setup=setup, rows=rows, nights=windows.night[rows], mjd=middle_mjd,
        seconds=np.array([slot.mode.exposure_s for slot in slots]),
        minutes=np.array([slot.mode.minutes for slot in slots]),
        earliest_mjd=np.array([slot.earliest_start_mjd for slot in slots]),
        latest_mjd=np.array([slot.latest_end_mjd for slot in slots]),
        sky=None if setup.is_array else camera_sky(setup, windows, rows),
        track=track, share=share, beside=() if track is None else bands_beside(model.target, setup, track),
    )  # fmt: skip


def good_seasons(
    campaign: Campaign, windows: Windows, seed: np.random.SeedSequence, seasons: int
) -> dict[tuple[str, str], Bools]:
    """Simulated nights that serve, (seasons, nights) each, by site and by what a setup needs (clear, thin).

    Sites that name one another share their random numbers: nights are good together as far as their shares agree.
    A clear night is good for setups that make do with thin cloud too.
    """
    sites = dict(sorted(campaign.sites.items()))
    root = weather_roots({slug: site.months.weather_with for slug, site in sites.items()})
    seeds = dict(zip(sites, seed.spawn(len(sites)), strict=True))
    months = np.array([int(night[5:7]) for night in windows.nights])
    found: dict[tuple[str, str], Bools] = {}
    for slug, site in sites.items():
        clear = np.zeros((seasons, len(months)), dtype=bool)
        for needs in ("clear", "thin"):
            shares = nightly_shares(site.months.good(needs), months)
            rng = np.random.default_rng(seeds[root[slug]])
            clear = clear | simulate_weather(shares, site.months.persistence, seasons, rng)
            found[slug, needs] = clear
    return found


def good_looks(
    campaign: Campaign, slots: Sequence[Slot], good: Mapping[tuple[str, str], Bools], rng: np.random.Generator,
    seasons: int,
) -> Bools:  # fmt: skip
    """Which looks succeed, (seasons, looks): weather that serves, and enough stations, drawn for each look."""
    success = np.ones((seasons, len(slots)), dtype=bool)
    for i, slot in enumerate(slots):
        setup = campaign.setup(slot.setup)
        needs = setup.camera.needs if setup.camera is not None else "clear"
        success[:, i] = good[setup.site_slug, needs][:, slot.night_index]
        if slot.chance_stations < 1.0:
            success[:, i] &= rng.random(seasons) < slot.chance_stations
    return success


def season_odds(
    campaign: Campaign, models: Mapping[str, TargetModel], book: SlotBook, windows: Windows,
    chosen: Mapping[str, Chosen], seed: np.random.SeedSequence, seasons: int = SEASONS,
) -> dict[str, tuple[GoalOdds, ...]]:  # fmt: skip
    """Odds of every goal: each season draws its weather and its truth (a fresh draw of the belief)."""
    weather_seed, rng_seed, station_seed = seed.spawn(3)
    good = good_seasons(campaign, windows, weather_seed, seasons)
    station_rng = np.random.default_rng(station_seed)
    found = {}
    for i, part in enumerate(book.problem.targets):
        model = models[part.name]
        draws = model.belief(seasons, campaign.file.seed, "odds").draws
        fresh = odds_part(model, book, part, chosen[part.name], draws, windows, campaign)
        slots = [book.slots[int(k)] for k in fresh.slots]
        success = good_looks(campaign, slots, good, station_rng, seasons)
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
    error = np.sqrt(max(share * (1.0 - share), 1.0 / REACH_DRAWS) / REACH_DRAWS)
    if share + 2.0 * error >= goal.odds:  # two standard errors: not clearly below what is asked for
        return ""
    if share > 0:
        text = (
            f"every slot of the season together reaches {goal.to} in only {100 * share:.0f} % of draws "
            f"(typically {best:.3g} {goal.to.unit})"
        ).replace(" )", ")")
    else:
        text = f"nothing you can schedule reaches {goal.to}: every slot of the season together gives {best:.3g}"
        text += f" {goal.to.unit}" if goal.to.unit else ""
    tie = _tie_of(feature, goal.learn)
    if tie:
        return f"{text}; {tie}"
    if feature.kind == "pair" and goal.learn in ("angle_deg", "beta"):
        return text + "; both rates leave speed and angle tied to the distance: ask for beta_cos, or bring a distance"
    return text + "; ask for less, start earlier, or add a setup with a finer image"


def _tie_of(feature: FeatureModel, learn: str) -> str:
    """Why an echo does not give a quantity alone, and what would; empty for quantities without such a tie."""
    if isinstance(feature, ArcletModel):
        of_arclets = {
            "age_yr": "place and motion leave age and inclination of the dust tied: narrow the slope's law",
            "distance_pc": "the motion gives distance only together with age and inclination: bring a distance",
            "source_direction_deg": "the direction of motion is turned by inclined dust: narrow slope_across_sigma",
        }
        return of_arclets.get(learn, "")
    if not isinstance(feature, RingModel):
        return ""
    ties = {
        ("sheet", "depth_pc"): _DEPTH_TIE,
        ("sheet", "distance_pc"): _DEPTH_TIE,
        ("shell", "distance_pc"): _SHELL_TIE,
        ("shell", "shell_radius_pc"): _SHELL_TIE,
        ("screen", "dust_distance_pc"): _SCREEN_TIE,
        ("screen", "source_distance_pc"): _SCREEN_TIE,
        ("filled", "distance_pc"): "the angle of highest polarisation is known to a few degrees only: "
        "narrow peak_sigma_deg, or bring a distance",
    }
    if feature.shape.kind == "screen" and feature.shape.distance is None:
        return ""
    return ties.get((feature.shape.kind, learn), "")


_DEPTH_TIE = "ring radii leave depth and distance tied: ask for depth_over_distance2, or bring a distance"
_SHELL_TIE = "a young ring leaves radius and distance tied: look around the day it stands still, or bring a distance"
_SCREEN_TIE = "ring radii give 1/dust distance - 1/source distance only: bring one of the two"
