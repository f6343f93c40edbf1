"""Plan files."""

from __future__ import annotations

import csv
import io
import os
from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from report_records import CAMERA, make_look, make_plan

from planner.errors import InputError
from planner.records import PLAN_COLUMNS, Plan
from planner.report import files

NASTY = [
    "=1+1",
    "+x",
    "-2",
    "@sum",
    "\t=x",
    "  =x",
    'a "b", c',
    "line\nbreak",
    "<b>bold</b>",
    "näme, 'q'",
    "a\\b",
    "#x",
]


def plan_named(names: list[str]) -> Plan:
    return make_plan(
        looks=tuple(make_look(i + 1, i, target=name) for i, name in enumerate(names)), campaign="=A, \n<b>"
    )


def test_csv_has_one_row_a_look_under_the_promised_columns(tmp_path: Path) -> None:
    plan = make_plan()
    files.write_plan(plan, tmp_path)
    rows = list(csv.reader(io.StringIO((tmp_path / "plan.csv").read_text(), newline="")))
    assert tuple(rows[0]) == PLAN_COLUMNS
    assert len(rows) == 1 + len(plan.looks)
    assert rows[1][1:4] == ["Reed", "south-plain/imager", "45 min"]


@pytest.mark.parametrize("name", NASTY)
def test_csv_cells_never_start_a_formula_and_lose_nothing(name: str) -> None:
    """Without the guard's apostrophe each cell reads back as the name that was given."""
    (_, row) = csv.reader(io.StringIO(files.plan_csv(plan_named([name])), newline=""))
    cell = row[PLAN_COLUMNS.index("target")]
    assert not cell.lstrip(" ").startswith(("=", "+", "-", "@", "\t", "\r", "\n"))
    assert cell in {name, "'" + name}


@given(st.text(st.characters(exclude_categories=("Cs",), exclude_characters="\0"), min_size=1, max_size=30))
@settings(max_examples=60)
def test_any_name_reads_back_from_csv(name: str) -> None:
    (_, row) = csv.reader(io.StringIO(files.plan_csv(plan_named([name])), newline=""))
    assert row[PLAN_COLUMNS.index("target")].removeprefix("'") == name.removeprefix("'")


def test_numbers_below_zero_stay_numbers_in_csv() -> None:
    """Only text is guarded: an S/N of -1.5 must not turn into text."""
    from dataclasses import replace

    look = make_look(1, 0)
    look = replace(look, slot=replace(look.slot, expected_snr=-1.5))
    (_, row) = csv.reader(io.StringIO(files.plan_csv(make_plan(looks=(look,))), newline=""))
    assert row[PLAN_COLUMNS.index("expected_snr")] == "-1.5"


def test_ecsv_keeps_units_numbers_and_the_facts_of_the_plan(tmp_path: Path) -> None:
    plan = make_plan()
    files.write_plan(plan, tmp_path)
    table = files.read_plan(tmp_path)
    assert tuple(table.colnames) == PLAN_COLUMNS
    assert str(table["exposure_s"].unit) == "s"
    assert str(table["moon_separation_deg"].unit) == "deg"
    assert table.meta["campaign"] == "Reed and Heron"
    assert table.meta["best_possible"] == plan.best_possible
    assert table.meta["shortfall"] == plan.shortfall
    assert table.meta["outcome"] == "good, not proven best"
    assert table.meta["odds"] == plan.odds
    expected = plan.table()
    for name in ("exposure_s", "airmass", "expected_snr", "chance_clear"):
        np.testing.assert_array_equal(np.ma.filled(table[name], np.nan), expected[name].to_numpy())
    assert list(table["start_utc"]) == list(expected["start_utc"])


def test_ecsv_keeps_names_with_markup_commas_newlines_and_signs(tmp_path: Path) -> None:
    names = [name for name in NASTY if name == name.strip()]  # the campaign's reader strips names
    files.write_plan(plan_named(names), tmp_path)
    assert list(files.read_plan(tmp_path)["target"]) == names


def test_a_plan_without_looks_is_written_and_read_back(tmp_path: Path) -> None:
    files.write_plan(make_plan(looks=()), tmp_path)
    table = files.read_plan(tmp_path)
    assert len(table) == 0
    assert tuple(table.colnames) == PLAN_COLUMNS


def test_files_replace_earlier_ones_and_leave_nothing_beside_them(tmp_path: Path) -> None:
    files.write_plan(make_plan(), tmp_path)
    files.write_plan(make_plan(looks=(make_look(1, 2, setup=CAMERA),)), tmp_path)
    assert sorted(os.listdir(tmp_path)) == ["plan.csv", "plan.ecsv"]
    assert len(files.read_plan(tmp_path)) == 1


def test_a_failure_half_way_leaves_the_earlier_file_whole(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A full disk at the moment of flushing must cost nothing that was there."""
    path = files.write_whole(tmp_path / "page.html", b"old")

    def full(_: int) -> None:
        raise OSError(28, "No space left on device", str(path))

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OSError, match="No space left"):
        files.write_whole(path, b"new and longer")
    assert path.read_bytes() == b"old"
    assert os.listdir(tmp_path) == ["page.html"]


def test_reading_without_a_plan_says_how_to_make_one(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"plan\.ecsv: there is no plan yet; run `lightlag plan`"):
        files.read_plan(tmp_path)


def test_a_damaged_plan_is_named_and_not_guessed_at(tmp_path: Path) -> None:
    (tmp_path / "plan.ecsv").write_text("not a table at all\n")
    with pytest.raises(InputError, match=r"plan\.ecsv: cannot be read as a plan .*plan again"):
        files.read_plan(tmp_path)


def test_a_plan_that_lacks_columns_names_them(tmp_path: Path) -> None:
    from astropy.table import Table

    Table({"look": [1]}).write(tmp_path / "plan.ecsv", format="ascii.ecsv")
    with pytest.raises(InputError, match=r"lacks the columns target, setup, mode"):
        files.read_plan(tmp_path)
