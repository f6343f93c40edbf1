"""What rings and arclets need of their target, and do not find."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from pydantic_core import InitErrorDetails

from planner.campaign.arclets import Arclet
from planner.campaign.base import fault
from planner.campaign.dust import UNREAD_FILTERS, ScreenDust
from planner.campaign.echoes import Ring
from planner.campaign.goals import LearnGoal
from planner.campaign.outbursts import Outburst

if TYPE_CHECKING:
    from planner.campaign.targets import Target

_Keys = tuple[str | int, ...]


def source_at_infinity(ring: Ring, target: Target) -> bool:
    """True for a screen whose source counts as infinitely far: said so, or a redshift and no distance."""
    return isinstance(ring.dust, ScreenDust) and (
        ring.dust.source_at_infinity or (target.redshift is not None and target.distance_pc is None)
    )


def echo_faults(target: Target) -> Iterator[InitErrorDetails]:
    """Find what is wrong with every ring and arclet of a target."""
    for i, feature in enumerate(target.features):
        if isinstance(feature, Ring):
            yield from _ring_faults(target, i, feature)
        elif isinstance(feature, Arclet) and target.distance_pc is None:
            text = f"arclet {feature.name!r} needs the target's distance_pc"
            yield fault(("features", i, "arclet"), text, feature.name)


def _ring_faults(target: Target, i: int, ring: Ring) -> Iterator[InitErrorDetails]:
    here: _Keys = ("features", i)
    if target.distance_pc is None and not source_at_infinity(ring, target):
        hint = ""
        if isinstance(ring.dust, ScreenDust):
            hint = " (or source_at_infinity: true in its dust)"
        elif target.redshift is not None:
            hint = " (for a source with a redshift the angular-diameter distance)"
        yield fault((*here, "ring"), f"ring {ring.name!r} needs the target's distance_pc{hint}", ring.name)
    if source_at_infinity(ring, target):
        for g, goal in enumerate(ring.goals):
            if isinstance(goal, LearnGoal) and goal.learn == "source_distance_pc":
                text = (
                    "the source counts as infinitely far, so its distance cannot be learned; ask for dust_distance_pc"
                )
                yield fault((*here, "goals", g, "learn"), text, goal.learn)
    if target.outburst is None:
        text = f"ring {ring.name!r} needs the target's outburst (peak, lasting_days, peak_mag)"
        yield fault((*here, "ring"), text, ring.name)
        return
    yield from _light_faults(ring, here, target.outburst)


def _light_faults(ring: Ring, here: _Keys, outburst: Outburst) -> Iterator[InitErrorDetails]:
    seen, peak = ring.brightness.seen, outburst.peak.date
    place = (*here, "brightness", "seen")
    if seen is not None and seen.on <= peak:
        text = f"got {seen.on}, but the outburst peaked on {peak}: no ring is seen before it"
        yield fault((*place, "on"), text, seen.on)
    if seen is not None and seen.filter not in outburst.filters:
        text = (
            f"filter {seen.filter!r} without a magnitude: ring {ring.name!r} was seen in it, so "
            f"outburst.peak_mag needs a value for {seen.filter!r}"
        )
        allowed = ", ".join(outburst.filters)
        yield fault((*place, "filter"), text, seen.filter, allowed=f"filters with a peak magnitude: {allowed}")
    grains = ring.dust.grains
    home = anchor_filter(ring, outburst)
    if isinstance(grains, str) and home in UNREAD_FILTERS[grains]:
        keys = (*place, "filter") if seen is not None else (*here, "dust", "grains")
        yield fault(keys, unread(grains, home), home)


def anchor_filter(ring: Ring, outburst: Outburst) -> str:
    """The filter in which a ring's brightness is reckoned: where it was seen, else V, else the first by name."""
    seen = ring.brightness.seen
    return seen.filter if seen else "V" if "V" in outburst.filters else min(outburst.filters, default="V")


def unread(grains: str, filter_name: str) -> str:
    """Say that a dust mix has no values for a filter, and what to do."""
    return (
        f"there are no scattering values of {grains} dust for filter {filter_name!r}; "
        "give grains: {albedo: ..., g: ...}, or use another filter"
    )
