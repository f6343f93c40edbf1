"""From a campaign folder to one checked ``Campaign``. Nothing is ever written."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TypeVar

from pydantic import ValidationError

from planner.campaign.array_setups import share_stations
from planner.campaign.base import FileRecord, Source
from planner.campaign.calendar_file import read_calendar
from planner.campaign.checks import check_campaign, check_files, find_setup
from planner.campaign.faults import input_error, joined, shown
from planner.campaign.light_curves import read_light_curve
from planner.campaign.records import (
    AnySite,
    ArraySite,
    Campaign,
    CampaignFile,
    SetupRef,
    Site,
    SpacecraftSite,
    Target,
)
from planner.campaign.shipped import shipped_folder
from planner.campaign.yaml_text import read_yaml
from planner.errors import InputError, Place, UnknownName, nearest

CAMPAIGN_FILE = "campaign.yaml"
_File = TypeVar("_File", bound=FileRecord)


def read_campaign(path: str | Path) -> Campaign:
    """Read a campaign folder (or its campaign.yaml), the targets it names and the sites it uses.

    A site is looked for in the folder's own ``sites`` first, then among the shipped profiles. All files are
    read and checked against each other before anything is returned.
    Raises InputError or UnknownName naming file, line, field, value, what is allowed, the nearest spelling.
    """
    folder, file_path = _locate(os.fspath(path))
    file = _read(CampaignFile, file_path)
    check_files(file)
    targets = tuple(
        read_target(os.path.join(folder, name), _named_by(file, i, j), folder)
        for i, programme in enumerate(file.programmes)
        for j, name in enumerate(programme.targets)
    )
    sites: dict[str, AnySite] = {}
    for i, allocation in enumerate(file.allocations):
        if allocation.site_slug not in sites:
            sites[allocation.site_slug] = _find_site(folder, file, i)
    _check_weather(folder, sites)
    setups = _setups(file, sites)
    campaign = Campaign(folder=folder, file=file, targets=targets, sites=sites, setups=setups)
    check_campaign(campaign)
    return campaign


def read_target(path: str | Path, named_by: Place | None = None, folder: str | None = None) -> Target:
    """Read one target file; ``named_by`` is where another file names it, for the message if it is missing.

    ``folder``: where its light curve is looked for; the file's own folder unless given.
    """
    place = os.fspath(path)
    _must_exist(place, named_by, "target file")
    data, source = read_yaml(Path(place), place)
    return _record(Target, _with_light_curve(data, source, folder or os.path.dirname(place)), source)


def _with_light_curve(data: object, source: Source, folder: str) -> object:
    """Put the table that an outburst names beside its name; a name that is no text is left to the record."""
    outburst = data.get("outburst") if isinstance(data, dict) else None
    if not isinstance(outburst, dict) or not isinstance(outburst.get("light_curve"), str) or "curve" in outburst:
        return data
    path = os.path.join(folder, outburst["light_curve"])
    curve = read_light_curve(path, source.place("outburst", "light_curve"))
    return {**data, "outburst": {**outburst, "curve": curve}}  # type: ignore[dict-item]


def read_site(path: str | Path) -> AnySite:
    """Read one site file: a place with telescopes (``site:``), an array (``array:``) or a ``spacecraft:``."""
    place = os.fspath(path)
    data, source = read_yaml(Path(path), place)
    if not isinstance(data, dict):
        raise InputError(f"got {shown(data)}, needs a mapping of fields", place=source.place())
    kinds = [key for key in _SITE_KINDS if key in data]
    if len(kinds) != 1:
        words = [repr(key) for key in kinds or _SITE_KINDS]
        joint = f"{', '.join(words[:-1])} {'and' if kinds else 'nor'} {words[-1]}"
        text = f"has {'both' if len(kinds) == 2 else 'all of'} {joint}" if kinds else f"has neither {joint}"
        near = [key for key in data if not kinds and nearest(key, _SITE_KINDS)]
        if near:
            raise UnknownName(near[0], _SITE_KINDS, what="key", place=source.place(near[0]), field=near[0])
        raise InputError(f"{text}; a site file has one of them", place=source.place())
    if kinds == ["spacecraft"]:
        return _record(SpacecraftSite, data, source)
    return (
        _record(ArraySite, data, source) if kinds == ["array"] else _record(Site, _with_calendars(data, source), source)
    )


_SITE_KINDS = ("site", "array", "spacecraft")


def _with_calendars(data: dict[str, object], source: Source) -> dict[str, object]:
    """Add the events of each telescope's calendar file to its ``busy``; what has a wrong shape is left alone."""
    telescopes = data.get("telescopes")
    if not isinstance(telescopes, dict):
        return data
    found = {}
    for name, record in telescopes.items():
        found[name] = record
        if isinstance(record, dict) and isinstance(record.get("busy_file"), str):
            path = Path(source.path).parent / record["busy_file"]
            events = read_calendar(path, source.place("telescopes", name, "busy_file"))
            own = record.get("busy") or []
            if isinstance(own, list):
                found[name] = {**record, "busy": [*own, *events]}
    return {**data, "telescopes": found}


def _locate(path: str) -> tuple[str, str]:
    """Folder and campaign file of what the user named."""
    if os.path.isdir(path):
        file = os.path.join(path, CAMPAIGN_FILE)
        if not os.path.isfile(file):
            near = nearest(CAMPAIGN_FILE, os.listdir(path))
            hint = f"; did you mean {near!r}? Name that file itself" if near else ""
            raise InputError(f"the folder holds no {CAMPAIGN_FILE}{hint}", place=Place(path), value=path)
        return path, file
    if not os.path.exists(path):
        raise InputError(
            f"there is no such file or folder; give a campaign folder or its {CAMPAIGN_FILE}",
            place=Place(path),
            value=path,
        )
    return os.path.dirname(path) or ".", path


def _named_by(file: CampaignFile, programme: int, target: int) -> Place:
    return file.source.place("programmes", programme, "targets", target)


def _must_exist(path: str, named_by: Place | None, what: str) -> None:
    if os.path.isfile(path):
        return
    folder, name = os.path.split(path)
    folder = folder or "."
    here = sorted(n for n in os.listdir(folder) if n.endswith(".yaml")) if os.path.isdir(folder) else []
    near = nearest(name, here)
    hint = f"; did you mean {near!r}?" if near else ""
    raise InputError(
        f"{what} {path!r} does not exist{hint}",
        place=named_by or Place(path),
        value=path,
        allowed=", ".join(here) or None,
    )


def _read(kind: type[_File], path: str) -> _File:
    """Read one file as one record."""
    return _record(kind, *read_yaml(Path(path), path))


def _record(kind: type[_File], data: object, source: Source) -> _File:
    """Make a record of a file's values, with its source."""
    if isinstance(data, dict) and "source" in data:  # the record's own field, which no file may set
        place = source.place("source")
        raise UnknownName("source", kind.permitted_keys(), what="key", place=place, field="source")
    try:
        record = kind.model_validate(data)
    except ValidationError as error:
        raise input_error(error, source) from None
    return record.model_copy(update={"source": source})


def _find_site(folder: str, file: CampaignFile, allocation: int) -> AnySite:
    """The folder's own site comes before a shipped one of the same slug."""
    slug = file.allocations[allocation].site_slug
    own, shipped = os.path.join(folder, "sites"), shipped_folder("site_profiles")
    for place in (own, str(shipped)):
        path = os.path.join(place, f"{slug}.yaml")
        if os.path.isfile(path):
            return read_site(path)
    known = {p.stem for place in (Path(own), shipped) if place.is_dir() for p in place.glob("*.yaml")}
    keys = ("allocations", allocation, "setup")
    raise UnknownName(
        slug, known, what="site", place=file.source.place(*keys), field=f"allocations[{allocation}].setup"
    )


def _check_weather(folder: str, sites: dict[str, AnySite]) -> None:
    """A site that has the weather of another names one that there is, used in this campaign or not."""
    known = set(sites)
    for place in (Path(folder, "sites"), shipped_folder("site_profiles")):
        known |= {p.stem for p in place.glob("*.yaml")} if place.is_dir() else set()
    for slug, site in sites.items():
        other = None if isinstance(site, SpacecraftSite) else site.months.weather_with
        if other is not None and other not in known - {slug}:
            keys = ("months", "weather_with")
            raise UnknownName(other, known - {slug}, what="site", place=site.source.place(*keys), field=".".join(keys))


def _setups(file: CampaignFile, sites: dict[str, AnySite]) -> tuple[SetupRef, ...]:
    found: dict[str, SetupRef] = {}
    errors: list[InputError] = []
    for i, allocation in enumerate(file.allocations):
        if allocation.setup in found:
            continue
        try:
            found[allocation.setup] = find_setup(file, i, sites[allocation.site_slug])
        except InputError as error:
            errors.append(error)
    if errors:
        raise joined(errors)
    return share_stations(tuple(found.values()))
