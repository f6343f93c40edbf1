"""The plan as files: CSV for people and spreadsheets, ECSV (units and facts kept) for programs."""

from __future__ import annotations

import contextlib
import csv
import io
import os
import secrets
from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from planner.errors import InputError, Place
from planner.records import PLAN_COLUMNS, Plan

if TYPE_CHECKING:
    from astropy.table import Table

CSV_NAME = "plan.csv"
ECSV_NAME = "plan.ecsv"

_UNITS = {"exposure_s": "s", "moon_separation_deg": "deg"}
_WORDS = frozenset(
    {"target", "setup", "mode", "night", "start_utc", "end_utc", "earliest_night", "latest_night", "state"}
)
_DESCRIPTIONS = {
    "look": "number of the look",
    "target": "name of the target",
    "setup": "site/setup",
    "mode": "how the look is taken",
    "night": "civil date at the evening of the night; for an array the UTC date at the middle of the transit",
    "start_utc": "start of the look, UTC",
    "end_utc": "end of the look, overheads included, UTC",
    "exposure_s": "shutter open, or on source",
    "airmass": "at the best moment of the window; nan where it means nothing",
    "moon_separation_deg": "at the best moment of the window; nan where it means nothing",
    "expected_snr": "median over draws of the brightest feature",
    "chance_clear": "chance of weather and equipment",
    "chance_measurable": "chance that at least one feature is measurable",
    "earliest_night": "earliest night of the request",
    "latest_night": "latest night of the request",
    "state": "state of the look",
}
# Spreadsheets take a cell that begins so for a formula; a leading apostrophe makes it text.
_FORMULA_STARTS = ("=", "+", "-", "@", "\t", "\r", "\n")


def safe_cell(text: str) -> str:
    """Return text that no spreadsheet takes for a formula."""
    return "'" + text if text.lstrip(" ").startswith(_FORMULA_STARTS) else text


def plan_csv(plan: Plan) -> str:
    """Return the plan as CSV text (RFC 4180 quoting), one row a look, formula-safe."""
    frame = plan.table()
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\r\n")
    writer.writerow(PLAN_COLUMNS)
    for row in frame.itertuples(index=False):
        writer.writerow([safe_cell(cell) if isinstance(cell, str) else cell for cell in row])
    return out.getvalue()


def plan_table(plan: Plan) -> Table:
    """Return the plan as an astropy table with units, descriptions and the facts of the plan as ``meta``."""
    import numpy as np
    from astropy.table import Column, Table

    frame = plan.table()
    table = Table()
    for name in PLAN_COLUMNS:
        kind = str if name in _WORDS else (np.int64 if name == "look" else np.float64)
        data = np.array(frame[name].tolist(), dtype=kind)
        table[name] = Column(data, name=name, unit=_UNITS.get(name), description=_DESCRIPTIONS[name])
    table.meta.update(
        campaign=plan.campaign,
        value=float(plan.value),
        value_realised=float(plan.value_realised),
        best_possible=float(plan.best_possible),
        shortfall=float(plan.shortfall),
        proof_shortfall=float(plan.proof_shortfall),
        outcome=plan.outcome.value,
        odds={name: float(odds) for name, odds in plan.odds.items()},
        reasons=dict(plan.reasons),
    )
    return table


def write_plan(plan: Plan, folder: str | Path) -> tuple[Path, Path]:
    """Write ``plan.csv`` and ``plan.ecsv`` into a folder; each appears whole or not at all.

    Returns the two paths. Raises OSError where the folder cannot be written; earlier files then stay as they were.
    """
    from astropy.io import ascii as tables

    buffer = io.StringIO()
    tables.write(plan_table(plan), buffer, format="ecsv")
    folder = Path(folder)
    csv_data, ecsv_data = plan_csv(plan).encode(), buffer.getvalue().encode()
    # Both are on the disk before either takes its place, so that they belong together.
    with _pending(folder / CSV_NAME, csv_data) as one, _pending(folder / ECSV_NAME, ecsv_data) as two:
        os.replace(one, folder / CSV_NAME)
        os.replace(two, folder / ECSV_NAME)
    return folder / CSV_NAME, folder / ECSV_NAME


def read_plan(folder: str | Path) -> Table:
    """Read ``plan.ecsv`` of a folder back into an astropy table.

    Raises InputError naming the file if it is not there or cannot be understood.
    """
    from astropy.table import Table

    path = Path(folder) / ECSV_NAME
    if not path.is_file():
        raise InputError("there is no plan yet; run `lightlag plan` on the campaign", place=Place(str(path)))
    try:
        table = Table.read(path, format="ascii.ecsv")
    except Exception as error:  # astropy raises many kinds; all mean that the file is damaged
        raise InputError(f"cannot be read as a plan ({error}); plan again", place=Place(str(path))) from error
    missing = [name for name in PLAN_COLUMNS if name not in table.colnames]
    if missing:
        raise InputError(f"lacks the columns {', '.join(missing)}; plan again", place=Place(str(path)))
    return table


def write_whole(path: str | Path, data: bytes) -> Path:
    """Write a file so that it appears whole or not at all; an earlier one is replaced."""
    path = Path(path)
    with _pending(path, data) as pending:
        os.replace(pending, path)
    return path


@contextlib.contextmanager
def _pending(path: Path, data: bytes) -> Iterator[Path]:
    """Write data beside ``path`` under a name of its own; what is not moved away is removed."""
    pending = path.with_name(f".{path.name}.{secrets.token_hex(4)}.part")
    try:
        with open(pending, "xb") as out:
            out.write(data)
            out.flush()
            os.fsync(out.fileno())
        yield pending
    finally:
        pending.unlink(missing_ok=True)
