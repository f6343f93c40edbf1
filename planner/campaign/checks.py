"""What must hold between the files of a campaign."""

from __future__ import annotations

import datetime as dt
import math
import os
from collections.abc import Iterator

from planner.campaign.array_setups import find_receiver
from planner.campaign.echo_checks import echo_errors
from planner.campaign.faults import field_name, joined
from planner.campaign.records import (
    AnySite,
    ArraySite,
    Campaign,
    CampaignFile,
    FixedLook,
    SetupRef,
    SpacecraftSite,
)
from planner.errors import InputError, UnknownName
from planner.units import date_of_mjd, mjd_of_iso


def check_files(file: CampaignFile) -> None:
    """Check campaign.yaml by itself: programmes named once, files in one of them, programmes that exist."""
    _raise([*_twin_programmes(file), *_twin_files(file), *_lost_allocations(file)])


def check_campaign(campaign: Campaign) -> None:
    """Check the files against each other: names of targets, weights, fixed looks."""
    _raise(list(_twin_targets(campaign)))
    _raise([*_weights(campaign), *_fixed_looks(campaign), *echo_errors(campaign)])
    _raise(list(_overlaps(campaign)))


def find_setup(file: CampaignFile, allocation: int, site: AnySite) -> SetupRef:
    """Find the setup that an allocation names at its site. Raises UnknownName with the nearest spelling."""
    slug, _, name = file.allocations[allocation].setup.partition("/")
    full = f"{slug}/{name}"
    keys = ("allocations", allocation, "setup")
    place, field = file.source.place(*keys), field_name(keys)
    if isinstance(site, ArraySite):
        return find_receiver(file, allocation, site)
    if isinstance(site, SpacecraftSite):
        if name not in site.setups:
            raise UnknownName(name, site.setups, what=f"setup of {slug}", place=place, field=field)
        return SetupRef(full, slug, site, slug, site.setups[name])
    for telescope, record in site.telescopes.items():
        if name in record.setups:
            return SetupRef(
                full,
                slug,
                site,
                f"{slug}/{telescope}",
                record.setups[name],
                shutdowns=record.shutdowns,
                busy=record.busy,
                mounted=record.mounted.get(name),
            )
    permitted = [setup for telescope in site.telescopes.values() for setup in telescope.setups]
    raise UnknownName(name, permitted, what=f"setup of {slug}", place=place, field=field)


def _raise(errors: list[InputError]) -> None:
    if errors:
        raise joined(errors)


def _error(
    file: CampaignFile, keys: tuple[str | int, ...], text: str, value: object, allowed: str | None = None
) -> InputError:
    return InputError(text, place=file.source.place(*keys), field=field_name(keys), value=value, allowed=allowed)


def _twin_programmes(file: CampaignFile) -> Iterator[InputError]:
    first: dict[str, int] = {}
    for i, programme in enumerate(file.programmes):
        j = first.setdefault(programme.name, i)
        if j != i:
            line = file.source.place("programmes", j, "name").line
            text = f"programme {programme.name!r} is already named on line {line}; names are unique"
            yield _error(file, ("programmes", i, "name"), text, programme.name)


def _twin_files(file: CampaignFile) -> Iterator[InputError]:
    first: dict[str, tuple[str, int | None]] = {}
    for i, programme in enumerate(file.programmes):
        for j, name in enumerate(programme.targets):
            keys = ("programmes", i, "targets", j)
            here = (programme.name, file.source.place(*keys).line)
            earlier = first.setdefault(os.path.normpath(name), here)
            if earlier is not here:
                owner, line = earlier
                text = (
                    f"target file {name!r} is already in programme {owner!r} (line {line}); "
                    "a target belongs to exactly one programme"
                )
                yield _error(file, keys, text, name)


def _lost_allocations(file: CampaignFile) -> Iterator[InputError]:
    names = [programme.name for programme in file.programmes]
    for i, allocation in enumerate(file.allocations):
        if allocation.programme not in names:
            keys = ("allocations", i, "programme")
            place, field = file.source.place(*keys), field_name(keys)
            yield UnknownName(allocation.programme, names, what="programme", place=place, field=field)


def _twin_targets(campaign: Campaign) -> Iterator[InputError]:
    first: dict[str, str] = {}
    for target in campaign.targets:
        place = target.source.place("target")
        other = first.setdefault(target.name, str(place))
        if other != str(place):
            text = f"the name {target.name!r} is already that of the target in {other}; names are unique"
            yield InputError(text, place=place, field="target", value=target.name)


def _weights(campaign: Campaign) -> Iterator[InputError]:
    file = campaign.file
    owner = {target.name: campaign.programme_of(target).name for target in campaign.targets}
    for i, programme in enumerate(file.programmes):
        names = [name for name, of in owner.items() if of == programme.name]
        for name in programme.weights:
            if name not in names:
                keys = ("programmes", i, "weights", name)
                what = f"target of programme {programme.name!r}"
                place, field = file.source.place(*keys), field_name(keys)
                yield UnknownName(name, names, what=what, place=place, field=field)


def _fixed_looks(campaign: Campaign) -> Iterator[InputError]:
    names = [target.name for target in campaign.targets]
    setups = [setup.name for setup in campaign.setups]
    for i, look in enumerate(campaign.file.fixed_looks):
        keys = ("fixed_looks", i)
        if look.target not in names:
            place = campaign.file.source.place(*keys, "target")
            yield UnknownName(look.target, names, what="target", place=place, field=field_name((*keys, "target")))
            continue
        programme = campaign.programme_of(campaign.target(look.target)).name
        granted = [a.setup for a in campaign.file.allocations if a.programme == programme]
        if look.setup not in setups:
            place = campaign.file.source.place(*keys, "setup")
            yield UnknownName(look.setup, granted, what="setup", place=place, field=field_name((*keys, "setup")))
            continue
        if look.setup not in granted:
            text = f"programme {programme!r} of target {look.target!r} has no allocation on {look.setup!r}"
            yield _error(campaign.file, (*keys, "setup"), text, look.setup, ", ".join(granted))
        season, night = campaign.file.season, evening_date(look, campaign.setup(look.setup))
        if not season.first <= night <= season.last:
            text = f"got {_iso(look.start_utc)}, of the night {night}: outside the season"
            yield _error(campaign.file, (*keys, "start_utc"), text, look.start_utc, f"{season.first} to {season.last}")


def evening_date(look: FixedLook, setup: SetupRef) -> dt.date:
    """The night a fixed look belongs to: the civil date at the site's evening; UTC date for arrays and spacecraft.

    The site's mean solar time stands for its civil time; the two part at noon only, when no one observes.
    """
    mjd = mjd_of_iso(look.start_utc.isoformat())
    if isinstance(setup.site, ArraySite | SpacecraftSite):
        return date_of_mjd(mjd)
    east = math.remainder(setup.site.longitude_deg, 360.0)
    return date_of_mjd(mjd + east / 360.0 - 0.5)


def _overlaps(campaign: Campaign) -> Iterator[InputError]:
    """Two promises to one telescope at one time."""
    looks = sorted(enumerate(campaign.file.fixed_looks), key=lambda pair: (pair[1].start_utc, pair[0]))
    for n, (i, early) in enumerate(looks):
        end = early.start_utc + dt.timedelta(minutes=early.minutes)
        for j, late in looks[n + 1 :]:
            if late.start_utc >= end:
                break
            if campaign.setup(early.setup).telescope != campaign.setup(late.setup).telescope:
                continue
            line = campaign.file.source.place("fixed_looks", i).line
            text = (
                f"the look at {late.target!r} starts {_iso(late.start_utc)}, but the look at "
                f"{early.target!r} (fixed_looks[{i}], line {line}) holds the same telescope until {_iso(end)}"
            )
            yield _error(campaign.file, ("fixed_looks", j, "start_utc"), text, late.start_utc)


def _iso(moment: dt.datetime) -> str:
    return moment.replace(tzinfo=None).isoformat(timespec="seconds") + "Z"
