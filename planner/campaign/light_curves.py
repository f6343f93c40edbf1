"""Light curves of outbursts, read from tables; what is wrong is named with its row."""

from __future__ import annotations

import csv
import math
import os
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import get_args

from planner.campaign.base import Filter
from planner.errors import InputError, Place, UnknownName
from planner.units import mjd_of_date, mjd_of_iso

LEAST_POINTS = 3  # fewer do not say when the light came and went
_TIMES = ("date", "days")


@dataclass(frozen=True)
class LightCurve:
    """Magnitudes against time by filter; times are MJD if ``dated``, else days from the peak, rising."""

    path: str
    dated: bool
    rows: Mapping[str, tuple[tuple[float, ...], tuple[float, ...]]]

    @property
    def filters(self) -> tuple[str, ...]:
        """The filters of the table."""
        return tuple(self.rows)


def read_light_curve(path: str, named_by: Place | None = None) -> LightCurve:
    """Read a table with the columns ``date`` (or ``days`` from the peak), ``filter`` and ``mag``.

    Lines that start with # are remarks. Raises InputError or UnknownName naming file, row and value.
    """
    if not os.path.isfile(path):
        raise InputError(f"light curve {path!r} does not exist", place=named_by or Place(path), value=path)
    with open(path, encoding="utf-8-sig", newline="") as file:
        lines = [(n, line) for n, line in enumerate(file.read().splitlines(), start=1)]
    kept = [(n, line) for n, line in lines if line.strip() and not line.lstrip().startswith("#")]
    if not kept:
        raise InputError("the light curve is empty; it needs the columns date, filter, mag", place=Place(path))
    numbers = [n for n, _ in kept]
    table = list(csv.reader(line for _, line in kept))
    columns, dated = _columns([cell.strip() for cell in table[0]], Place(path, numbers[0]))
    found: dict[str, dict[float, float]] = {}
    for n, cells in zip(numbers[1:], table[1:], strict=True):
        place = Place(path, n)
        if len(cells) != len(table[0]):
            raise InputError(f"the row has {len(cells)} cells, the header {len(table[0])}", place=place)
        name = cells[columns["filter"]].strip()
        if name not in get_args(Filter):
            raise UnknownName(name, get_args(Filter), what="filter", place=place, field="filter")
        time = _time(cells[columns["time"]].strip(), dated, place)
        mag = _number(cells[columns["mag"]].strip(), "mag", place)
        if not -30 <= mag <= 40:
            raise InputError(
                f"got {mag:g}, needs a magnitude", place=place, field="mag", value=mag, allowed="-30 to 40"
            )
        if time in found.setdefault(name, {}):
            raise InputError(f"filter {name!r} has a second row for the same moment", place=place, value=time)
        found[name][time] = mag
    return LightCurve(path, dated, _sorted(found, path))


def _sorted(
    found: Mapping[str, Mapping[float, float]], path: str
) -> dict[str, tuple[tuple[float, ...], tuple[float, ...]]]:
    if not found:
        raise InputError("the light curve has a header and no rows", place=Place(path))
    for name, points in found.items():
        if len(points) < LEAST_POINTS:
            text = f"filter {name!r} has {len(points)} rows, needs at least {LEAST_POINTS}"
            raise InputError(text, place=Place(path), field="filter", value=name)
    return {
        name: (tuple(sorted(points)), tuple(points[t] for t in sorted(points)))
        for name, points in sorted(found.items())
    }


def _columns(header: Sequence[str], place: Place) -> tuple[dict[str, int], bool]:
    permitted = (*_TIMES, "filter", "mag")
    for name in header:
        if name not in permitted:
            raise UnknownName(name, permitted, what="column", place=place)
        if header.count(name) > 1:
            raise InputError(f"the column {name!r} stands twice", place=place, value=name)
    times = [name for name in _TIMES if name in header]
    if len(times) != 1:
        text = "has both date and days" if times else "has neither date nor days"
        raise InputError(f"the header {text}; it needs one of them", place=place)
    for name in ("filter", "mag"):
        if name not in header:
            raise InputError(f"the column {name!r} is missing", place=place, allowed=", ".join(permitted))
    return {"time": header.index(times[0]), "filter": header.index("filter"), "mag": header.index("mag")}, (
        times[0] == "date"
    )


def _time(text: str, dated: bool, place: Place) -> float:
    if not dated:
        return _number(text, "days", place)
    try:
        return mjd_of_date(text) if len(text) == 10 else mjd_of_iso(text)
    except ValueError:
        raise InputError(
            f"got {text!r}; write a date as year-month-day, e.g. 2021-05-20", place=place, field="date", value=text
        ) from None


def _number(text: str, field: str, place: Place) -> float:
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise InputError(f"got {text!r}, needs a finite number", place=place, field=field, value=text)
    return value
