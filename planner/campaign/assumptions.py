"""What a campaign takes for granted: every field that was left out and has a default with a stated origin."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from planner.campaign.base import Record
from planner.campaign.faults import field_name
from planner.campaign.laws import Law
from planner.campaign.presets import CAMERAS, RECEIVERS, Preset
from planner.campaign.records import (
    ArraySite,
    CameraSetup,
    Campaign,
    Receiver,
    SetupRef,
    Site,
    SpacecraftSite,
    Target,
    feature_kind,
)
from planner.campaign.spacecraft import GROUND_ONLY
from planner.errors import Place


@dataclass(frozen=True, slots=True)
class Assumption:
    """One field that was left out.

    ``owner``: whose field it is, e.g. "target Sallow, ring Sallow ring"; ``field``: path of keys inside the
    owner; ``value``: the value used, in words; ``why``: where it comes from; ``place``: where to write it.
    """

    owner: str
    field: str
    value: str
    why: str
    place: Place


def assumptions(record: Campaign | Target | Site | ArraySite | SpacecraftSite | SetupRef) -> list[Assumption]:
    """List what was left out of a campaign (targets, sites and the setups it uses), or of one part of it.

    A field counts when it was declared with ``assumed``, or was filled by a preset.
    """
    if isinstance(record, Campaign):
        parts: list[Any] = [*record.targets, *record.sites.values(), *record.setups]
        return [found for part in parts for found in assumptions(part)]
    if isinstance(record, Target):
        return list(_of_target(record))
    if isinstance(record, SetupRef):
        return list(_of_setup(record))
    words = "array" if isinstance(record, ArraySite) else "spacecraft" if isinstance(record, SpacecraftSite) else "site"
    return list(_of_site(record, f"{words} {record.name}"))


def grouped(found: Iterable[Assumption]) -> dict[tuple[str, str, str], list[Assumption]]:
    """Put together what is alike: (field, value, why) -> all who share it, in order of first mention.

    The numbers of list entries are left out of the field: ``goals[].odds`` is one group.
    """
    groups: dict[tuple[str, str, str], list[Assumption]] = {}
    for one in found:
        groups.setdefault((re.sub(r"\[\d+\]", "[]", one.field), one.value, one.why), []).append(one)
    return groups


def _of_target(target: Target) -> Iterator[Assumption]:
    kinds = {feature_kind(feature) for feature in target.features}
    idle = {"features"}
    if target.redshift is None:
        idle.add("cosmology")
    if "ring" not in kinds:
        idle.add("plate_scale_sigma")
    if not kinds & {"ring", "arclet"}:
        idle.add("centre_sigma_arcsec")
    if kinds <= {"ring", "arclet"}:
        idle |= {"core_wander_beam", "core_shift_mas_ghz", "flux_scale_fraction"}
    here = _Here(f"target {target.name}", target, ())
    yield from _walk(target, here, frozenset(idle))
    for i, feature in enumerate(target.features):
        owner = f"target {target.name}, {feature_kind(feature)} {feature.name}"
        yield from _walk(feature, _Here(owner, target, ("features", i)), frozenset())


def _of_site(site: Site | ArraySite | SpacecraftSite, owner: str) -> Iterator[Assumption]:
    """The place itself; its setups are listed one by one, and only those in use."""
    idle = {"telescopes", "receivers", "setups"}
    if isinstance(site, ArraySite):
        idle |= {"seeing_arcsec", "thin_cloud", "thin_cloud_mag"}  # radio does not feel them
    yield from _walk(site, _Here(owner, site, ()), frozenset(idle))


def _of_setup(setup: SetupRef) -> Iterator[Assumption]:
    owner, name = f"setup {setup.name}", setup.name.split("/", 1)[1]
    if setup.receiver is not None:
        yield from _walk(setup.receiver, _Here(owner, setup.site, ("receivers", name.partition("@")[0])), frozenset())
    if setup.camera is not None and isinstance(setup.site, SpacecraftSite):
        idle = frozenset(GROUND_ONLY)
        yield from _walk(setup.camera, _Here(owner, setup.site, ("setups", name)), idle)
    elif setup.camera is not None:
        telescope = setup.telescope.split("/", 1)[1]
        here = _Here(owner, setup.site, ("telescopes", telescope, "setups", name))
        yield from _walk(setup.camera, here, frozenset())


@dataclass(frozen=True, slots=True)
class _Here:
    """Where a record stands: its owner in words, the file, and the owner's keys in it."""

    owner: str
    file: Target | Site | ArraySite | SpacecraftSite
    keys: tuple[str | int, ...]

    def assumption(self, inner: tuple[str | int, ...], value: Any, why: str) -> Assumption:
        """Make the entry of one field; its place is that of the nearest thing that was written."""
        return Assumption(self.owner, field_name(inner), _words(value), why, self.file.source.place(*self.keys, *inner))


def _walk(record: Record, here: _Here, idle: frozenset[str], inner: tuple[str | int, ...] = ()) -> Iterator[Assumption]:
    """List the fields that were left out; ``idle``: those without effect here, or listed elsewhere."""
    filled = _preset(record)
    for name, info in type(record).model_fields.items():
        if name in idle:
            continue
        value, given, keys = (
            getattr(record, name),
            name in record.model_fields_set,
            (*inner, info.alias or name),
        )
        why = info.json_schema_extra.get("assumed") if isinstance(info.json_schema_extra, dict) else None
        if not given and filled is not None and name in filled[1].values:
            yield here.assumption(keys, value, f"preset {filled[0]} ({filled[1].words}): {filled[1].why}")
        elif why and not given:
            yield here.assumption(keys, value, str(why))
        else:
            yield from _inside(value, here, idle, keys)


def _inside(value: Any, here: _Here, idle: frozenset[str], keys: tuple[str | int, ...]) -> Iterator[Assumption]:
    if isinstance(value, Record):
        yield from _walk(value, here, idle, keys)
    elif isinstance(value, Mapping):
        for key, item in value.items():
            yield from _inside(item, here, idle, (*keys, key))
    elif isinstance(value, tuple):
        for i, item in enumerate(value):
            yield from _inside(item, here, idle, (*keys, i))


def _preset(record: Record) -> tuple[str, Preset] | None:
    """Name and preset of a camera or receiver that has one."""
    if isinstance(record, CameraSetup) and record.camera:
        return record.camera, CAMERAS[record.camera]
    if isinstance(record, Receiver) and record.receiver_class:
        return record.receiver_class, RECEIVERS[record.receiver_class]
    return None


def _words(value: Any) -> str:
    """A value for people."""
    if isinstance(value, bool):
        return "yes" if value else "no"
    if isinstance(value, float):
        return f"{value:g}"
    if isinstance(value, Law):
        return value.words()
    if isinstance(value, Record):
        pairs = ((name, getattr(value, name)) for name in type(value).model_fields)
        return ", ".join(f"{name} {_words(item)}" for name, item in pairs if item is not None)
    if isinstance(value, Mapping):
        return ", ".join(f"{key} {_words(item)}" for key, item in value.items())
    return str(value)
