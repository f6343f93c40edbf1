"""From a campaign folder to one checked ``Campaign``. Nothing is ever written."""

from __future__ import annotations

import os
from pathlib import Path
from typing import TypeVar

from pydantic import ValidationError

from planner.campaign.base import FileRecord, Source
from planner.campaign.checks import check_campaign, check_files, find_setup
from planner.campaign.faults import input_error, joined, shown
from planner.campaign.records import AnySite, ArraySite, Campaign, CampaignFile, SetupRef, Site, Target
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
        read_target(os.path.join(folder, name), _named_by(file, i, j))
        for i, programme in enumerate(file.programmes)
        for j, name in enumerate(programme.targets)
    )
    sites: dict[str, AnySite] = {}
    for i, allocation in enumerate(file.allocations):
        if allocation.site_slug not in sites:
            sites[allocation.site_slug] = _find_site(folder, file, i)
    setups = _setups(file, sites)
    campaign = Campaign(folder=folder, file=file, targets=targets, sites=sites, setups=setups)
    check_campaign(campaign)
    return campaign


def read_target(path: str | Path, named_by: Place | None = None) -> Target:
    """Read one target file; ``named_by`` is where another file names it, for the message if it is missing."""
    _must_exist(os.fspath(path), named_by, "target file")
    return _read(Target, os.fspath(path))


def read_site(path: str | Path) -> AnySite:
    """Read one site file: a place with telescopes (``site:``) or an array of antennas (``array:``)."""
    place = os.fspath(path)
    data, source = read_yaml(Path(path), place)
    if not isinstance(data, dict):
        raise InputError(f"got {shown(data)}, needs a mapping of fields", place=source.place())
    kinds = [key for key in ("site", "array") if key in data]
    if len(kinds) != 1:
        text = "has both 'site' and 'array'" if kinds else "has neither 'site' nor 'array'"
        near = [key for key in data if not kinds and nearest(key, ("site", "array"))]
        if near:
            raise UnknownName(near[0], ("site", "array"), what="key", place=source.place(near[0]), field=near[0])
        raise InputError(f"{text}; a site file has one of them", place=source.place())
    return _record(ArraySite, data, source) if kinds == ["array"] else _record(Site, data, source)


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
    return tuple(found.values())
