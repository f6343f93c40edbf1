"""The only wiring: from a campaign to its forecast, windows and plan."""

from __future__ import annotations

import os
import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import numpy as np

from planner.campaign.reading import read_campaign
from planner.campaign.records import Campaign, Target
from planner.errors import RecountError
from planner.records import (
    Account,
    Belief,
    Floats,
    Forecast,
    GoalResult,
    Ints,
    Look,
    Outcome,
    Plan,
    Progress,
    State,
    TargetForecast,
    Track,
    Windows,
    silent,
)
from planner.units import mjd_of_date

if TYPE_CHECKING:
    from planner.campaign.assumptions import Assumption
    from planner.prediction.model import TargetModel
    from planner.schedule.slots import SlotBook
    from planner.schedule.solve import Solution

__all__ = ["Results", "Understanding", "forecast", "plan", "read_campaign", "understood", "windows", "work"]

FORECAST_DRAWS = 1024  # standard error of a chance 1.6 % at most
PLAN_DRAWS = 16  # draws to plan with: more changes plans by less than the odds' own error (trials, 16 against 32)


# ------------------------------------------------------------------ shared pieces


@dataclass(frozen=True)
class Prepared:
    """What every later step needs: arrays' tracks, observation models and present beliefs."""

    tracks: Mapping[tuple[str, str], Track]
    models: Mapping[str, TargetModel]
    beliefs: Mapping[str, Belief]


def prepare(campaign: Campaign, progress: Progress = silent) -> Prepared:
    """Build tracks, models and beliefs."""
    from planner.prediction.model import build_model
    from planner.prediction.tracks import beams_beside, track_of
    from planner.schedule.slots import setup_targets

    tracks: dict[tuple[str, str], Track] = {}
    models, beliefs = {}, {}
    for i, target in enumerate(campaign.targets):
        progress("belief", i / len(campaign.targets))
        beams: dict[str, float] = {}
        companion_beams: dict[str, float] = {}
        for setup in setup_targets(campaign, target):
            if setup.is_array:
                track = tracks[(target.name, setup.name)] = track_of(target, setup)
                if track.hours_up > 0:
                    beams[setup.name] = float(np.sqrt(track.beam_major_mas * track.beam_minor_mas))
                    companion_beams |= beams_beside(target, setup, track)
        model = models[target.name] = build_model(campaign, target, companion_beams | beams)
        beliefs[target.name] = model.belief(FORECAST_DRAWS, campaign.file.seed, "forecast")
    progress("belief", 1.0)
    return Prepared(tracks, models, beliefs)


def night_middles(campaign: Campaign) -> Floats:
    """Moment of each night that a forecast is made for: 24h UTC of its evening date, (T,)."""
    return np.array([mjd_of_date(day) + 1.0 for day in campaign.nights])


# ------------------------------------------------------------------ forecast and windows


def forecast(campaign: Campaign, *, progress: Progress = silent) -> Forecast:
    """Forecast every observable of every feature on each night of the season, with the chance of measuring it.

    Chances are for a clear dark night of median seeing, the target at its highest and the setup's longest look.
    """
    return _forecast(campaign, prepare(campaign, progress), progress)


def _forecast(campaign: Campaign, ready: Prepared, progress: Progress) -> Forecast:
    from concurrent.futures import ThreadPoolExecutor

    from planner.prediction.curves import target_forecast
    from planner.prediction.spacings import spacing_answers
    from planner.schedule.slots import setup_targets

    nights = night_middles(campaign)

    def one(target: Target) -> TargetForecast:
        setups = setup_targets(campaign, target)
        model, belief = ready.models[target.name], ready.beliefs[target.name]
        made = target_forecast(model, belief, nights, setups, ready.tracks)
        spacings = spacing_answers(model, belief.draws, nights, setups, ready.tracks)
        return replace(made, spacings=tuple(spacings))

    progress("forecast", 0.0)
    found: list[TargetForecast] = []
    # threads: the work is in numpy, which lets others run meanwhile; targets know nothing of one another
    with ThreadPoolExecutor(max_workers=min(8, os.cpu_count() or 1)) as pool:
        for i, made in enumerate(pool.map(one, campaign.targets)):
            found.append(made)
            progress("forecast", (i + 1) / len(campaign.targets))
    labels = tuple(day.isoformat() for day in campaign.nights)
    return Forecast(campaign.name, labels, nights, tuple(found))


def windows(
    campaign: Campaign, *, extra: Mapping[str, Sequence[Any]] | None = None, progress: Progress = silent
) -> Windows:
    """Find where and when each target can be observed, with a ledger of the hours lost to each limit.

    ``extra``: further limits by setup, objects made with astroplan's limits; slow, and good to some minutes only.
    """
    from planner.prediction.tracks import track_of
    from planner.sky.windows import find_windows

    return find_windows(campaign, track_of=track_of, extra=extra, progress=progress)


def window_hints(campaign: Campaign, found: Windows) -> tuple[tuple[str, str, str], ...]:
    """(target, setup, what would help) for every pair with little time, other shipped places considered."""
    from planner.campaign.reading import read_site
    from planner.campaign.shipped import shipped_folder
    from planner.sky.what_helps import what_would_help

    profiles = [read_site(path) for path in sorted(shipped_folder("site_profiles").glob("*.yaml"))]
    return tuple((h.target, h.setup, h.text) for h in what_would_help(campaign, found, profiles))


def _windows(campaign: Campaign, ready: Prepared, progress: Progress) -> Windows:
    from planner.sky.windows import find_windows

    return find_windows(campaign, track_of=lambda t, s: ready.tracks[(t.name, s.name)], progress=progress)


# ------------------------------------------------------------------ plan


def plan(campaign: Campaign, seconds: float = 60.0, *, progress: Progress = silent) -> Plan:
    """Solve for the looks that teach most within every allocation, and recount the result.

    ``seconds`` stops the solver between steps. Raises PlanningError when promises cannot be kept and RecountError
    when the finished plan breaks a limit.
    """
    ready = prepare(campaign, progress)
    return _plan(campaign, ready, _windows(campaign, ready, progress), seconds, progress)


def _book(campaign: Campaign, ready: Prepared, found: Windows, progress: Progress) -> SlotBook:
    from planner.schedule.slots import CHANCE_DRAWS, SlotBuilder

    builder = SlotBuilder(campaign, found)
    for i, target in enumerate(campaign.targets):
        progress("slots", i / len(campaign.targets))
        model = ready.models[target.name]
        draws = model.belief(PLAN_DRAWS, campaign.file.seed, "plan").draws
        builder.add(model, draws, ready.beliefs[target.name].draws[:CHANCE_DRAWS])
    progress("slots", 1.0)
    return builder.freeze()


def _plan(campaign: Campaign, ready: Prepared, found: Windows, seconds: float, progress: Progress) -> Plan:
    from planner.schedule.solve import solve

    started = time.monotonic()
    book = _book(campaign, ready, found, progress)
    solution = solve(book.problem, seed=campaign.file.seed, seconds=seconds, progress=progress)
    looks = _looks(book, solution)
    chosen = _chosen(book, solution)
    progress("odds", 0.0)
    goals = _goals(campaign, ready, book, found, chosen)
    progress("odds", 1.0)
    result = Plan(
        campaign=campaign.name,
        looks=looks,
        value=solution.value,
        value_realised=solution.value_realised,
        best_possible=solution.best_possible,
        proof_value=solution.proof_value,
        accounts=_accounts(campaign, looks),
        goals=goals,
        reasons=_reasons(campaign, book, solution, found),
        outcome=solution.outcome,
        notes=tuple(solution.notes),
        seconds=time.monotonic() - started,
    )
    if solution.outcome is not Outcome.IMPOSSIBLE:
        _recount(campaign, result, progress)
    return result


def _looks(book: SlotBook, solution: Solution) -> tuple[Look, ...]:
    starts = {int(k): float(s) for k, s in zip(solution.slots, solution.start_mjd, strict=True)}
    order = sorted(starts, key=lambda k: (starts[k], k))
    return tuple(
        Look(
            number=i + 1,
            slot=book.slots[k],
            start_mjd=starts[k],
            state=State.FIXED if book.slots[k].fixed_look is not None else State.PROPOSED,
        )
        for i, k in enumerate(order)
    )


def _chosen(book: SlotBook, solution: Solution) -> dict[str, Chosen]:
    from planner.schedule.promise import Chosen

    starts = {int(k): float(s) for k, s in zip(solution.slots, solution.start_mjd, strict=True)}
    found = {}
    for part in book.problem.targets:
        local: Ints = np.array([i for i, k in enumerate(part.slots) if int(k) in starts], dtype=np.int64)
        middles = [starts[int(part.slots[i])] + book.problem.minutes[part.slots[i]] / 2880.0 for i in local]
        found[part.name] = Chosen(local, np.array(middles, dtype=float))
    return found


def _goals(
    campaign: Campaign, ready: Prepared, book: SlotBook, found: Windows, chosen: Mapping[str, Chosen]
) -> tuple[GoalResult, ...]:
    from planner.prediction.coordinates import named_seed
    from planner.schedule.promise import goal_results, season_odds, season_reach
    from planner.schedule.utility import expected_utilities

    odds = season_odds(campaign, ready.models, book, found, chosen, named_seed(campaign.file.seed, "odds"))
    parts = book.problem.targets
    utilities = {p.name: expected_utilities(p, chosen[p.name].local) for p in parts}
    reach = {p.name: season_reach(campaign, ready.models[p.name], book, p, found) for p in parts}
    return goal_results(ready.models, ready.beliefs, book, chosen, odds, utilities, reach)


def _accounts(campaign: Campaign, looks: tuple[Look, ...]) -> tuple[Account, ...]:
    hours = np.zeros(len(campaign.file.allocations))
    for look in looks:
        hours[look.slot.allocation] += look.slot.mode.minutes / 60.0
    return tuple(
        Account(a.setup, a.programme, a.sky, a.hours, float(h))
        for a, h in zip(campaign.file.allocations, hours, strict=True)
    )


def _reasons(campaign: Campaign, book: SlotBook, solution: Solution, found: Windows) -> dict[str, str]:
    from planner.schedule.reasons import why_left_out

    taken = {book.slots[int(k)].target for k in solution.slots}
    return {t.name: why_left_out(campaign, t, book, solution, found) for t in campaign.targets if t.name not in taken}


def _recount(campaign: Campaign, result: Plan, progress: Progress) -> None:
    from planner.schedule.recount import recount

    progress("recount", 0.0)
    report = recount(campaign, result.table())
    progress("recount", 1.0)
    if report.breaches:
        raise RecountError(report.breaches)


# ------------------------------------------------------------------ all at once, and what was understood


@dataclass(frozen=True)
class Understanding:
    """What ``check`` tells: facts read, defaults assumed, first answers, ties of parameters, failing assumptions."""

    facts: tuple[tuple[str, str, str], ...]  # target, feature ("" for the target itself), what was written
    assumptions: tuple[Assumption, ...]
    answers: tuple[tuple[str, str, str], ...]  # target, feature, text
    ties: tuple[tuple[str, str], ...]  # target, text
    warnings: tuple[str, ...]


def understood(campaign: Campaign, *, progress: Progress = silent) -> Understanding:
    """Say what was understood of a campaign, with a first answer, in a few seconds and without a solver."""
    ready = prepare(campaign, progress)
    return _understood(campaign, ready, _forecast(campaign, ready, progress))


def _understood(campaign: Campaign, ready: Prepared, made: Forecast) -> Understanding:
    from planner.campaign.assumptions import assumptions
    from planner.campaign.in_words import facts_of
    from planner.instruments.calibration import calibrations
    from planner.prediction.first_answer import answers_of, ties_of
    from planner.schedule.slots import setup_targets

    answers: list[tuple[str, str, str]] = []
    ties: list[tuple[str, str]] = []
    warnings: list[str] = []
    nights = night_middles(campaign)
    for target in campaign.targets:
        one = made.target(target.name)
        model, refs = ready.models[target.name], setup_targets(campaign, target)
        answers += [(target.name, feature, text) for feature, text in answers_of(one, made)]
        answers += [(target.name, feature, text) for feature, text in one.spacings]
        ties += [(target.name, text) for text in ties_of(model, nights, [s.name for s in refs])]
        warnings += list(one.warnings)
    return Understanding(
        (*facts_of(campaign), *calibrations(campaign)),
        tuple(assumptions(campaign)),
        tuple(answers),
        tuple(ties),
        tuple(warnings),
    )


@dataclass(frozen=True)
class Results:
    """Everything about one campaign, made from the same belief."""

    campaign: Campaign
    understanding: Understanding
    forecast: Forecast
    windows: Windows
    plan: Plan


def work(campaign: Campaign, *, seconds: float = 60.0, progress: Progress = silent) -> Results:
    """Do the whole job once, sharing what the steps have in common."""
    ready = prepare(campaign, progress)
    made = _forecast(campaign, ready, progress)
    found = _windows(campaign, ready, progress)
    result = _plan(campaign, ready, found, seconds, progress)
    return Results(campaign, _understood(campaign, ready, made), made, found, result)


if TYPE_CHECKING:
    from planner.schedule.promise import Chosen
