"""Reads the part of iCalendar (RFC 5545) that observatories' calendars use.

VEVENT with DTSTART, DTEND or DURATION, and SUMMARY; whole dates, UTC moments and moments with an IANA zone. Whole
dates take nights (DTEND is not included), moments take exactly their time. Cancelled events, and those marked as
transparent, take nothing. What cannot be understood is an error with its line: an event that is passed over would
be a night wrongly planned.
"""

from __future__ import annotations

import datetime as dt
import re
from collections.abc import Iterator
from dataclasses import dataclass, field
from pathlib import Path
from zoneinfo import ZoneInfo

from planner.errors import InputError, Place

LARGEST_BYTES = 20_000_000  # a calendar of a hundred thousand events; more is a mistake


@dataclass
class _Line:
    """One content line: its number in the file, name, parameters and value."""

    number: int
    name: str
    parameters: dict[str, str]
    value: str


@dataclass
class _Event:
    """Properties of a VEVENT while it is read."""

    line: int
    found: dict[str, _Line] = field(default_factory=dict)


def read_calendar(path: Path, named_by: Place | None = None) -> list[dict[str, object]]:
    """Read an iCalendar file into entries as ``busy:`` takes them: {from, to, why} or {start_utc, end_utc, why}.

    ``named_by``: where another file names it, for the message if it is missing.
    Raises InputError naming file, line and value.
    """
    if not path.is_file():
        raise InputError(
            f"calendar {str(path)!r} does not exist", place=named_by or Place(str(path)), field="busy_file"
        )
    if path.stat().st_size > LARGEST_BYTES:
        raise InputError(
            f"the calendar has {path.stat().st_size} bytes, more than {LARGEST_BYTES}; cut it to the season",
            place=Place(str(path)),
        )
    try:
        text = path.read_bytes().decode("utf-8-sig")
    except UnicodeDecodeError as error:
        raise InputError(f"the calendar is not UTF-8 text ({error.reason})", place=Place(str(path))) from None
    return list(_entries(text, str(path)))


def _entries(text: str, path: str) -> Iterator[dict[str, object]]:
    lines = list(_unfolded(text, path))
    if not lines or (lines[0].name, lines[0].value.upper()) != ("BEGIN", "VCALENDAR"):
        raise InputError("needs BEGIN:VCALENDAR on its first line", place=Place(path, lines[0].number if lines else 1))
    event: _Event | None = None
    inside: list[str] = []
    for line in lines:
        word = line.value.strip().upper()
        if line.name == "BEGIN":
            inside.append(word)
            event = _Event(line.number) if word == "VEVENT" else event
        elif line.name == "END":
            if not inside or inside[-1] != word:
                open_part = inside[-1] if inside else "nothing"
                raise InputError(f"END:{word} where {open_part} is open", place=Place(path, line.number), value=word)
            inside.pop()
            if word == "VEVENT" and event is not None:
                entry = _entry(event, path)
                event = None
                if entry:
                    yield entry
        elif event is not None and inside[-1] == "VEVENT":
            if line.name in event.found and line.name in ("DTSTART", "DTEND", "DURATION"):
                raise InputError(f"{line.name} stands twice in one event", place=Place(path, line.number))
            event.found.setdefault(line.name, line)
    if inside:
        raise InputError(f"the file ends inside {inside[-1]}; it is cut off", place=Place(path, lines[-1].number))


def _unfolded(text: str, path: str) -> Iterator[_Line]:
    """Content lines; a line that begins with a blank continues the one before (RFC 5545, 3.1)."""
    raw: list[tuple[int, str]] = []
    for number, part in enumerate(re.split(r"\r\n|\n|\r", text), 1):
        if part[:1] in (" ", "\t") and raw:
            raw[-1] = (raw[-1][0], raw[-1][1] + part[1:])
        elif part.strip():
            raw.append((number, part))
    for number, part in raw:
        match = re.fullmatch(r'([A-Za-z0-9-]+)((?:;[A-Za-z0-9-]+=(?:"[^"]*"|[^":;]*))*):(.*)', part, re.DOTALL)
        if match is None:
            raise InputError("is no line of iCalendar (NAME:value)", place=Place(path, number), value=part[:60])
        pairs = re.findall(r';([A-Za-z0-9-]+)=("[^"]*"|[^":;]*)', match[2])
        yield _Line(number, match[1].upper(), {key.upper(): value.strip('"') for key, value in pairs}, match[3])


def _entry(event: _Event, path: str) -> dict[str, object] | None:
    """What one event takes; None if it takes nothing."""
    found = event.found
    if _word(found, "STATUS") == "CANCELLED" or _word(found, "TRANSP") == "TRANSPARENT":
        return None
    for name in ("RRULE", "RDATE", "RECURRENCE-ID"):
        if name in found:
            raise InputError(
                f"{name}: events that repeat are not read; export the calendar with each event by itself",
                place=Place(path, found[name].number),
                field=name,
                value=found[name].value,
            )
    if "DTSTART" not in found:
        raise InputError("the event has no DTSTART", place=Place(path, event.line), field="DTSTART")
    start = _when(found["DTSTART"], path)
    end = _end(found, start, path)
    why = _plain(found["SUMMARY"].value) if "SUMMARY" in found else ""
    if isinstance(start, dt.datetime) or isinstance(end, dt.datetime):
        if not (isinstance(start, dt.datetime) and isinstance(end, dt.datetime)):
            line = found["DTEND"]
            raise InputError("DTSTART and DTEND must both be dates or both moments", place=Place(path, line.number))
        if end == start:
            return None
        _ordered(start, end, found, event, path)
        return {"start_utc": start, "end_utc": end, "why": why}
    _ordered(start, end, found, event, path)
    return {"from": start, "to": max(start, end - dt.timedelta(days=1)), "why": why}


def _word(found: dict[str, _Line], name: str) -> str:
    return found[name].value.strip().upper() if name in found else ""


def _ordered(start: dt.date, end: dt.date, found: dict[str, _Line], event: _Event, path: str) -> None:
    if end < start:
        line = found.get("DTEND")
        raise InputError(
            f"the event ends ({end}) before it starts ({start})",
            place=Place(path, line.number if line else event.line),
            field="DTEND",
        )


def _end(found: dict[str, _Line], start: dt.date, path: str) -> dt.date:
    """End of an event: DTEND, DTSTART + DURATION, or one day for a date alone (RFC 5545, 3.6.1)."""
    if "DTEND" in found:
        return _when(found["DTEND"], path)
    if "DURATION" in found:
        return start + _duration(found["DURATION"], path)
    return start if isinstance(start, dt.datetime) else start + dt.timedelta(days=1)


def _when(line: _Line, path: str) -> dt.date:
    """A date, or a moment in UTC."""
    text = line.value.strip()
    try:
        if re.fullmatch(r"\d{8}", text):
            return dt.datetime.strptime(text, "%Y%m%d").date()
        if re.fullmatch(r"\d{8}T\d{6}Z?", text):
            moment = dt.datetime.strptime(text.rstrip("Z"), "%Y%m%dT%H%M%S")
            if text.endswith("Z"):
                return moment.replace(tzinfo=dt.UTC)
            if zone := line.parameters.get("TZID"):
                return moment.replace(tzinfo=_zone(zone)).astimezone(dt.UTC)
            raise ValueError("a moment without a zone; end it with Z (UTC) or give TZID")
        raise ValueError("needs a date such as 20270309 or a moment such as 20270309T041200Z")
    except ValueError as error:
        raise InputError(f"{line.name}: {error}", place=Place(path, line.number), field=line.name, value=text) from None


def _zone(name: str) -> ZoneInfo:
    try:
        return ZoneInfo(name)
    except (KeyError, ValueError, OSError):
        raise ValueError(f"unknown zone {name!r}; export the calendar in UTC, or with IANA zones") from None


def _duration(line: _Line, path: str) -> dt.timedelta:
    match = re.fullmatch(
        r"\+?P(?:(\d+)W|(?:(\d+)D)?(?:T(?:(\d+)H)?(?:(\d+)M)?(?:(\d+)S)?)?)", line.value.strip().upper()
    )
    if match is None or not any(match.groups()):
        raise InputError(
            "DURATION: needs a length such as PT4H30M or P2D",
            place=Place(path, line.number),
            field="DURATION",
            value=line.value,
        )
    weeks, days, hours, minutes, seconds = (int(part or 0) for part in match.groups())
    return dt.timedelta(weeks=weeks, days=days, hours=hours, minutes=minutes, seconds=seconds)


def _plain(text: str) -> str:
    """Text with its escapes undone (RFC 5545, 3.3.11), on one line."""
    undone = re.sub(r"\\(.)", lambda m: " " if m[1] in "nN" else m[1], text)
    return " ".join(undone.split())
