"""Why a target has no look in a plan, in one sentence a person can act on."""

from __future__ import annotations

import numpy as np

from planner.campaign.records import Campaign, Target
from planner.records import Outcome, Windows
from planner.schedule.slots import SlotBook, setup_targets
from planner.schedule.solve import Solution
from planner.schedule.utility import utilities_without_looks

MET = 0.995  # a goal counts as met without looks above this utility


def why_left_out(campaign: Campaign, target: Target, book: SlotBook, solution: Solution, windows: Windows) -> str:
    """Return the reason that stopped a target, from the first stage that did."""
    loss = book.losses[target.name]
    setups = setup_targets(campaign, target)
    if not setups:
        return "its programme has no allocation; add one"
    if loss.windows == 0:
        return _no_window(target, windows, [s.name for s in setups])
    if loss.slots == 0:
        return _no_slot(target, book)
    part = next(p for p in book.problem.targets if p.name == target.name)
    if not part.goals:
        return "none of its features has a goal; add one"
    start = utilities_without_looks(part)
    if (start > MET).all():
        return "all its goals are met by what is known already"
    if solution.outcome is Outcome.STOPPED:
        return f"it has {loss.slots} slots, but the search stopped before it was placed; give the search more seconds"
    return _outbid(campaign, target, book, solution)


def _no_window(target: Target, windows: Windows, setups: list[str]) -> str:
    ledger = windows.ledger
    t = ledger.targets.index(target.name)
    parts = []
    for name in setups:
        if name not in ledger.setups:
            continue
        lost = ledger.lost_hours[t, ledger.setups.index(name)].sum(axis=0)
        order = np.argsort(lost)[::-1]
        named = [f"{ledger.limits[i]} {lost[i]:.0f} h" for i in order if lost[i] >= 1 and i != 0][:2]
        parts.append(f"{name} ({', '.join(named) or f'{ledger.limits[0]} only'})")
    return (
        "no window in the season: hours of the night lost with " + "; ".join(parts)
        + ". Another site or other months would help"
    )  # fmt: skip


def _no_slot(target: Target, book: SlotBook) -> str:
    loss = book.losses[target.name]
    parts = []
    if loss.unmeasurable:
        top = sorted(loss.reasons.items(), key=lambda item: -item[1])
        named = "; ".join(f"{name} ({100 * share:.0f} % of draws and nights)" for name, share in top[:2] if share > 0)
        parts.append(f"{loss.unmeasurable} nights on which nothing is measurable: {named}")
    if loss.short:
        parts.append(f"{loss.short} nights with windows shorter than the look")
    if loss.sky:
        parts.append(f"{loss.sky} nights with a brighter sky than its allocations accept")
    return f"{loss.windows} nights with a window but no usable slot: " + "; ".join(parts or ["none offered"])


def _outbid(campaign: Campaign, target: Target, book: SlotBook, solution: Solution) -> str:
    slots = [s for s in book.slots if s.target == target.name]
    cheapest = min(s.mode.minutes for s in slots) / 60.0
    accounts = sorted({s.allocation for s in slots})
    used = dict.fromkeys(accounts, 0.0)
    for k in solution.slots:
        slot = book.slots[int(k)]
        if slot.allocation in used:
            used[slot.allocation] += slot.mode.minutes / 60.0
    texts = []
    for a in accounts:
        allocation = campaign.file.allocations[a]
        texts.append(f"{allocation.setup} ({allocation.sky} sky): {used[a]:.1f} of {allocation.hours:g} h go to others")
    weight = campaign.weight_of(target)
    return (
        f"{len(slots)} slots of at least {cheapest:.1f} h each, but its goals (weight {weight:g}) gain less per hour "
        f"than those of other targets: " + "; ".join(texts) + ". More hours or a larger weight would bring it in"
    )
