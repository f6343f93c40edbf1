"""iCalendar files: what is taken from them, and errors that name the line."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import Any

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from planner.campaign.calendar_file import read_calendar
from planner.campaign.reading import read_site
from planner.errors import InputError

SITE = """\
site: Hill
invented: true
longitude_deg: -70
latitude_deg: -30
height_m: 2000
time_zone: America/Santiago
months: {clear: [0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7, 0.7]}
telescopes:
  one:
    busy: [2027-05-01]
    busy_file: others.ics
    setups: {cam: {aperture_m: 1.0}}
"""


def calendar(*lines: str) -> str:
    return "\r\n".join(["BEGIN:VCALENDAR", "VERSION:2.0", *lines, "END:VCALENDAR", ""])


def event(*lines: str) -> tuple[str, ...]:
    return ("BEGIN:VEVENT", *lines, "END:VEVENT")


def read(tmp_path: Path, text: str) -> list[dict[str, Any]]:
    path = tmp_path / "others.ics"
    path.write_bytes(text.encode())
    return read_calendar(path)


def test_a_whole_day_event_takes_its_nights_and_its_end_is_not_included(tmp_path: Path) -> None:
    # RFC 5545, 3.6.1: DTEND is non-inclusive; without it, a DATE lasts one day
    got = read(
        tmp_path,
        calendar(
            *event("DTSTART;VALUE=DATE:20270309", "DTEND;VALUE=DATE:20270312", "SUMMARY:Engineering\\, mirror\\nwash"),
            *event("DTSTART;VALUE=DATE:20270401"),
        ),
    )
    assert got == [
        {"from": dt.date(2027, 3, 9), "to": dt.date(2027, 3, 11), "why": "Engineering, mirror wash"},
        {"from": dt.date(2027, 4, 1), "to": dt.date(2027, 4, 1), "why": ""},
    ]


def test_moments_take_their_time_in_utc(tmp_path: Path) -> None:
    got = read(
        tmp_path,
        calendar(
            *event("DTSTART:20270309T020000Z", "DTEND:20270309T043000Z"),
            *event("DTSTART;TZID=America/Santiago:20270310T220000", "DURATION:PT1H30M"),  # summer time there: UTC-3
        ),
    )
    assert [(e["start_utc"].isoformat(), e["end_utc"].isoformat()) for e in got] == [
        ("2027-03-09T02:00:00+00:00", "2027-03-09T04:30:00+00:00"),
        ("2027-03-11T01:00:00+00:00", "2027-03-11T02:30:00+00:00"),
    ]


def test_folded_lines_are_joined(tmp_path: Path) -> None:
    # RFC 5545, 3.1: a line break and one blank vanish
    got = read(tmp_path, calendar(*event("DTSTART;VALUE=DA", " TE:20270309", "SUMMARY:A long", "  story")))
    assert got == [{"from": dt.date(2027, 3, 9), "to": dt.date(2027, 3, 9), "why": "A long story"}]


def test_cancelled_and_transparent_events_and_other_parts_take_nothing(tmp_path: Path) -> None:
    alarm = ("BEGIN:VALARM", "TRIGGER:-PT15M", "DTSTART:nonsense", "END:VALARM")
    got = read(
        tmp_path,
        calendar(
            *event("DTSTART;VALUE=DATE:20270309", "STATUS:CANCELLED"),
            *event("DTSTART;VALUE=DATE:20270310", "TRANSP:TRANSPARENT"),
            "BEGIN:VTODO", "DTSTART;VALUE=DATE:20270313", "END:VTODO",
            *event("DTSTART;VALUE=DATE:20270311", *alarm),
        ),
    )  # fmt: skip
    assert [e["from"] for e in got] == [dt.date(2027, 3, 11)]


FAULTS = {
    "no calendar": ("BEGIN:VEVENT\r\nEND:VEVENT\r\n", r"others\.ics:1: needs BEGIN:VCALENDAR on its first line"),
    "empty": ("", r"others\.ics:1: needs BEGIN:VCALENDAR"),
    "no line": (calendar("hello"), r"others\.ics:3: is no line of iCalendar"),
    "floating": (calendar(*event("DTSTART:20270309T020000")), r"others\.ics:4, DTSTART: .*end it with Z \(UTC\)"),
    "no date": (calendar(*event("DTSTART:20270230")), r"others\.ics:4, DTSTART: "),
    "zone": (calendar(*event("DTSTART;TZID=Hill Time:20270309T020000")), r"ics:4, DTSTART: .*unknown zone 'Hill Time'"),
    "repeats": (
        calendar(*event("DTSTART:20270309T020000Z", "RRULE:FREQ=WEEKLY")),
        r"others\.ics:5, RRULE: .*events that repeat are not read; export",
    ),
    "no start": (calendar(*event("SUMMARY:x")), r"others\.ics:3, DTSTART: the event has no DTSTART"),
    "reversed": (
        calendar(*event("DTSTART:20270309T020000Z", "DTEND:20270308T020000Z")),
        r"others\.ics:5, DTEND: the event ends .* before it starts",
    ),
    "mixed": (
        calendar(*event("DTSTART;VALUE=DATE:20270309", "DTEND:20270310T020000Z")),
        r"others\.ics:5: DTSTART and DTEND must both be dates or both moments",
    ),
    "cut off": (
        "BEGIN:VCALENDAR\r\nBEGIN:VEVENT\r\nDTSTART:20270309\r\n",
        r"others\.ics:3: the file ends inside VEVENT",
    ),
    "crossed": (calendar("BEGIN:VEVENT", "END:VTODO"), r"others\.ics:4: END:VTODO where VEVENT is open"),
    "duration": (
        calendar(*event("DTSTART:20270309T020000Z", "DURATION:2 hours")),
        r"others\.ics:5, DURATION: .*such as PT4H30M",
    ),
    "twice": (calendar(*event("DTSTART:20270309", "DTSTART:20270310")), r"others\.ics:5: DTSTART stands twice"),
}


@pytest.mark.parametrize("name", list(FAULTS))
def test_what_cannot_be_understood_is_named_with_its_line(name: str, tmp_path: Path) -> None:
    text, words = FAULTS[name]
    with pytest.raises(InputError, match=words):
        read(tmp_path, text)


@settings(max_examples=60, deadline=None)
@given(st.text(max_size=200))
def test_any_text_is_read_or_refused_with_an_input_error(tmp_path_factory: pytest.TempPathFactory, text: str) -> None:
    path = tmp_path_factory.mktemp("any") / "x.ics"
    path.write_bytes(
        ("BEGIN:VCALENDAR\nBEGIN:VEVENT\n" + text + "\nEND:VEVENT\nEND:VCALENDAR").encode("utf-8", "replace")
    )
    try:
        found = read_calendar(path)
    except InputError as error:
        found = None
        told = str(error)
    if found is None:
        assert "x.ics" in told
    else:
        assert all({"from", "to", "why"} == e.keys() or {"start_utc", "end_utc", "why"} == e.keys() for e in found)


def test_a_site_takes_the_events_of_its_calendar_beside_its_own(tmp_path: Path) -> None:
    (tmp_path / "hill.yaml").write_text(SITE)
    (tmp_path / "others.ics").write_text(calendar(*event("DTSTART;VALUE=DATE:20270309", "SUMMARY:guests")))
    busy = read_site(tmp_path / "hill.yaml").telescopes["one"].busy
    assert [(b.first, b.last, b.why) for b in busy] == [
        (dt.date(2027, 5, 1), dt.date(2027, 5, 1), ""),
        (dt.date(2027, 3, 9), dt.date(2027, 3, 9), "guests"),
    ]


def test_a_calendar_that_is_missing_is_named_where_the_site_names_it(tmp_path: Path) -> None:
    (tmp_path / "hill.yaml").write_text(SITE)
    with pytest.raises(InputError, match=r"hill\.yaml:11, busy_file: calendar '.*others\.ics' does not exist"):
        read_site(tmp_path / "hill.yaml")


@pytest.mark.parametrize(
    ("lines", "words"),
    [
        ("    busy: [{from: 2027-05-01}]", r"hill\.yaml:10, telescopes\.one\.busy\[0\]: needs a date, or from and to"),
        ("    busy: [{from: 2027-05-03, to: 2027-05-01}]", r"busy\[0\]: to 2027-05-01 is before from 2027-05-03"),
        ("    busy: [yesterday]", r"busy\[0\]\.from: got 'yesterday'; write a date as year-month-day"),
        ("    mounted: {camm: [[2027-05-01, 2027-05-02]]}", r"unknown setup 'camm'; did you mean 'cam'\?"),
        ("    mounted: {cam: [[2027-05-03, 2027-05-02]]}", r"mounted\.cam\[0\]: to 2027-05-02 is before from"),
    ],
)
def test_faults_of_a_telescopes_calendar_are_told_with_file_and_line(tmp_path: Path, lines: str, words: str) -> None:
    text = SITE.replace("    busy: [2027-05-01]\n    busy_file: others.ics\n", lines + "\n")
    (tmp_path / "hill.yaml").write_text(text)
    with pytest.raises(InputError, match=words):
        read_site(tmp_path / "hill.yaml")
