"""Tables and messages on the terminal, and exit codes."""

from __future__ import annotations

import io
import warnings

import pytest
import typer
from hypothesis import given, settings
from hypothesis import strategies as st
from rich.console import Console

from planner.cli import codes, show
from planner.errors import DomainError, InputError, LightlagError, Place, PlanningError, RecountError
from planner.report.tables import TextTable

COLUMNS = ("look", "night", "setup, mode", "odds")
ROWS = (
    ("1", "2027-02-07", "north-hill/wide-camera, 60 min", "87 ± 1 %"),
    ("2", "2027-02-22", "south-plain/a-very-long-name-of-an-imager, 45 min", "9 ± 1 %"),
)
TABLE = TextTable("Looks", COLUMNS, ROWS, frozenset({0, 1, 3}), "a note")


def printed(table: TextTable, width: int, **more: int) -> str:
    out = io.StringIO()
    show.show(Console(file=out, width=width, highlight=False, markup=False), table, **more)
    return out.getvalue()


@pytest.mark.parametrize("width", [40, 60, 100, 200])
def test_no_line_is_wider_than_the_terminal(width: int) -> None:
    assert max(map(len, printed(TABLE, width).splitlines())) <= width


def test_numbers_stay_whole_while_text_can_give_way() -> None:
    """At 60 characters the setups must break, dates and odds must not."""
    text = printed(TABLE, 60)
    for whole in ("2027-02-07", "87 ± 1 %", "north-hill/wide-camera,"):
        assert whole in text


def test_a_table_that_fits_is_not_broken_at_all() -> None:
    lines = printed(TABLE, 120).splitlines()
    assert len([line for line in lines if "2027-02" in line]) == 2
    assert any(line.rstrip().endswith("45 min                       9 ± 1 %") or "45 min" in line for line in lines)
    assert len(lines) == 1 + 2 + 2 + 1 + 1  # title, head and rule, rows, note, blank


@given(
    st.lists(st.tuples(st.text("ab c%(", max_size=30), st.text("xyz 12", max_size=50)), min_size=1, max_size=5),
    st.integers(20, 120),
)
@settings(max_examples=60, deadline=None)
def test_columns_always_fit_together(rows: list[tuple[str, str]], width: int) -> None:
    table = TextTable("T", ("one", "two"), tuple(rows), frozenset({1}))
    widths, gap = show.column_widths(table, width)
    assert sum(widths) + gap * (len(widths) - 1) <= width
    assert min(widths) >= 1


def test_more_rows_than_wanted_are_counted() -> None:
    text = printed(TABLE, 100, most=1)
    assert "south-plain" not in text
    assert "... and 1 more" in text


def test_markup_in_a_name_is_printed_and_not_obeyed() -> None:
    table = TextTable("[red]T[/red]", ("a",), (("[bold]x[/bold] :smile: [/nonsense]",),))
    text = printed(table, 100)
    assert "[bold]x[/bold] :smile: [/nonsense]" in text
    assert "[red]T[/red]" in text


def test_a_percent_sign_stays_with_its_number() -> None:
    for width in range(6, 40):
        assert "\n%" not in show.broken("reached in 87 % of the seasons, or 3 %", width)


def test_lists_hang_their_later_lines() -> None:
    out = io.StringIO()
    show.bullets(Console(file=out, width=30), "Notes", ["one two three four five six seven eight"])
    assert out.getvalue().splitlines()[1:3] == ["  - one two three four five", "    six seven eight"]


@pytest.mark.parametrize(
    ("error", "code"),
    [
        (InputError("bad", place=Place("a.yaml", 3)), 2),
        (DomainError("beta", 2, "below 1"), 2),
        (PermissionError(13, "Permission denied", "/x/plan.csv"), 2),
        (PlanningError("no plan"), 3),
        (RecountError(["look 1 starts in daylight"]), 3),
        (KeyboardInterrupt(), 130),
    ],
)
def test_every_error_of_the_user_becomes_its_code_and_one_message(
    error: BaseException, code: int, capsys: pytest.CaptureFixture[str]
) -> None:
    def command() -> None:
        raise error

    with pytest.raises(typer.Exit) as caught:
        codes.guarded(command)()
    out, err = capsys.readouterr()
    assert caught.value.exit_code == code
    assert out == ""
    assert err.startswith("lightlag: ")
    assert err.count("\n") == 1


def test_messages_keep_place_and_remedy(capsys: pytest.CaptureFixture[str]) -> None:
    def command() -> None:
        raise InputError("got -3, needs a value above 0", place=Place("reed.yaml", 7), field="dust.depth_pc")

    with pytest.raises(typer.Exit):
        codes.guarded(command)()
    assert capsys.readouterr().err == "lightlag: reed.yaml:7, dust.depth_pc: got -3, needs a value above 0\n"


def test_a_warning_becomes_a_note_on_stderr(capsys: pytest.CaptureFixture[str]) -> None:
    def command() -> None:
        warnings.warn("dates pass the tables in use", UserWarning, stacklevel=1)

    with warnings.catch_warnings():
        warnings.simplefilter("always")
        codes.guarded(command)()
    assert capsys.readouterr().err == "lightlag: note: dates pass the tables in use\n"


def test_a_bug_is_not_dressed_up_as_an_error_of_the_user() -> None:
    """What the user cannot cause must keep its traceback."""

    def command() -> None:
        raise ZeroDivisionError("bug")

    with pytest.raises(ZeroDivisionError, match="bug"):
        codes.guarded(command)()


def test_every_class_of_our_errors_has_a_code() -> None:
    def below(kind: type) -> set[type]:
        return {kind}.union(*(below(sub) for sub in kind.__subclasses__()))

    assert {codes.exit_code(kind.__new__(kind)) for kind in below(LightlagError)} == {2, 3}
