"""Setups of arrays: the whole array or a subarray of it, and which of them need the same stations."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace

from planner.campaign.faults import field_name
from planner.campaign.records import ArraySite, CampaignFile, SetupRef
from planner.errors import InputError, UnknownName


def find_receiver(file: CampaignFile, allocation: int, site: ArraySite) -> SetupRef:
    """Find the receiver, or ``receiver@subarray``, that an allocation names.

    Raises UnknownName with the nearest spelling, InputError when too few stations have the receiver.
    """
    slug, _, name = file.allocations[allocation].setup.partition("/")
    band, _, part = name.partition("@")
    keys = ("allocations", allocation, "setup")
    place, field = file.source.place(*keys), field_name(keys)
    if band not in site.receivers:
        raise UnknownName(band, site.receivers, what=f"receiver of {slug}", place=place, field=field)
    if part and part not in site.subarrays:
        raise UnknownName(part, site.subarrays, what=f"subarray of {slug}", place=place, field=field)
    array = site.part(part) if part else site
    for wanted in (band, *site.receivers[band].simultaneous):
        able = sum(wanted in station.sefd_jy for station in array.stations)
        if able < array.least_stations:
            whose = f"subarray {part!r} of {slug}" if part else slug
            raise InputError(
                f"only {able} stations of {whose} have a sefd_jy for {wanted!r}, fewer than its least_stations "
                f"{array.least_stations}; add sefd_jy in {site.source.path} or lower least_stations",
                place=place,
                field=field,
                value=f"{slug}/{name}",
            )
    return SetupRef(f"{slug}/{name}", slug, array, slug, receiver=site.receivers[band], receiver_name=band)


def companions(setup: SetupRef) -> tuple[SetupRef, ...]:
    """The other bands that a look with a setup records, as setups that are taken as its look is taken."""
    main, site = setup.receiver, setup.site
    if main is None or not isinstance(site, ArraySite):
        return ()
    taken = {
        "look_hours": main.look_hours, "on_source": main.on_source, "interleaved_with": main.interleaved_with,
        "scan_min": main.scan_min, "mode_shares": main.mode_shares, "simultaneous": (),
    }  # fmt: skip
    part = setup.name.partition("@")
    return tuple(
        replace(
            setup, name=f"{setup.site_slug}/{band}{part[1]}{part[2]}", receiver_name=band,
            receiver=site.receivers[band].model_copy(update=taken),
        )
        for band in main.simultaneous
    )  # fmt: skip


def share_stations(setups: Sequence[SetupRef]) -> tuple[SetupRef, ...]:
    """Give setups of one array a telescope of their own where no station ties them to the others in use.

    Setups that share a station, directly or through others, do one job at a time. That is exact for parts that do
    not overlap; where two parts overlap a third but not each other, those two are kept apart without need.
    """
    groups: list[tuple[str, set[str], set[str]]] = []  # array, stations, subarrays
    for setup in setups:
        if not isinstance(setup.site, ArraySite):
            continue
        stations, names = {s.station for s in setup.site.stations}, {subarray_of(setup)}
        apart = []
        for slug, others, parts in groups:
            if slug == setup.site_slug and others & stations:
                stations, names = stations | others, names | parts
            else:
                apart.append((slug, others, parts))
        groups = [*apart, (setup.site_slug, stations, names)]
    return tuple(_in_group(setup, groups) for setup in setups)


def subarray_of(setup: SetupRef) -> str:
    """Name of the subarray that a setup uses; "" for the whole array."""
    return setup.name.partition("/")[2].partition("@")[2]


def _in_group(setup: SetupRef, groups: Sequence[tuple[str, set[str], set[str]]]) -> SetupRef:
    if not isinstance(setup.site, ArraySite):
        return setup
    own = {s.station for s in setup.site.stations}
    parts = next(parts for slug, stations, parts in groups if slug == setup.site_slug and own <= stations)
    return setup if "" in parts else replace(setup, telescope=f"{setup.site_slug}@{'+'.join(sorted(parts))}")
