"""What must hold between echoes and the setups that look at them."""

from __future__ import annotations

from collections.abc import Iterator

from planner.campaign.arclets import Arclet
from planner.campaign.dust import UNREAD_FILTERS
from planner.campaign.echo_faults import anchor_filter, unread
from planner.campaign.echoes import Ring, colour_filters
from planner.campaign.faults import field_name
from planner.campaign.records import Campaign, SetupRef, Target
from planner.errors import InputError, UnknownName


def echo_errors(campaign: Campaign) -> Iterator[InputError]:
    """Find templates of unknown setups, and dust without values in the filter of a setup."""
    for target in campaign.targets:
        names = [s.name for s in _cameras(campaign, target)]
        keys: list[tuple[str | int, ...]] = [("templates", i) for i in range(len(target.templates))]
        records = list(target.templates)
        for f, feature in enumerate(target.features):
            if isinstance(feature, Ring | Arclet):
                keys += [("features", f, "templates", i) for i in range(len(feature.templates))]
                records += list(feature.templates)
            if isinstance(feature, Ring):
                yield from _unread_dust(campaign, target, f, feature)
        for where, template in zip(keys, records, strict=True):
            if template.setup not in names:
                place, field = target.source.place(*where, "setup"), field_name((*where, "setup"))
                yield UnknownName(template.setup, names, what="setup of a template", place=place, field=field)


def _cameras(campaign: Campaign, target: Target) -> list[SetupRef]:
    programme = campaign.programme_of(target).name
    granted = {a.setup for a in campaign.file.allocations if a.programme == programme}
    return [s for s in campaign.setups if s.name in granted and s.camera is not None]


def _unread_dust(campaign: Campaign, target: Target, number: int, ring: Ring) -> Iterator[InputError]:
    grains = ring.dust.grains
    if not isinstance(grains, str) or target.outburst is None:
        return
    home = anchor_filter(ring, target.outburst)
    seen = ring.brightness.seen
    coloured = {name for key in (seen.colours if seen else ()) for name in colour_filters(key)}
    for setup in _cameras(campaign, target):
        assert setup.camera is not None
        used = setup.camera.filter
        if used in UNREAD_FILTERS[grains] and used != home and used not in coloured:
            keys = ("features", number, "dust", "grains")
            text = f"setup {setup.name} uses filter {used!r}: {unread(grains, used)}"
            yield InputError(text, place=target.source.place(*keys), field=field_name(keys), value=grains)
