"""Tables and sentences on the terminal."""

from __future__ import annotations

import re
import shutil
import textwrap
from collections.abc import Iterable
from typing import TYPE_CHECKING

from planner.report.tables import TextTable

if TYPE_CHECKING:
    from rich.console import Console

WIDTH = 100  # characters when the output is no terminal
LONGEST_WHOLE = 26  # characters of a word that a narrow column still keeps whole
SHORTEST_TEXT = 8  # characters that a column of text keeps before numbers are broken
_TIE = "\u00a0"  # stands for a blank that no line may break at, until the line is broken


def screen() -> Console:
    """Return the console of standard output; names are printed as they are, never as markup."""
    from rich.console import Console

    width = shutil.get_terminal_size((WIDTH, 24)).columns
    return Console(width=width, highlight=False, markup=False, emoji=False)


def show(console: Console, table: TextTable, *, most: int | None = None) -> None:
    """Print a table, at most ``most`` rows of it."""
    from rich import box
    from rich.table import Table
    from rich.text import Text

    say(console, table.title, bold=True)
    if table.rows:
        widths, gap = column_widths(table, console.width)
        grid = Table(box=box.SIMPLE_HEAD, padding=(0, gap - 1, 0, 0), pad_edge=False, show_edge=False)
        for i, (name, wide) in enumerate(zip(table.columns, widths, strict=True)):
            side = "right" if i in table.numbers else "left"
            grid.add_column(Text(broken(name, wide)), justify=side, overflow="fold", width=wide)  # type: ignore[arg-type]
        for row in table.rows[:most]:
            grid.add_row(*(Text(broken(cell, wide)) for cell, wide in zip(row, widths, strict=True)))
        console.print(grid)
        if most is not None and len(table.rows) > most:
            say(console, f"... and {len(table.rows) - most} more")
    if table.note:
        say(console, table.note, dim=True)
    console.print()


def say(console: Console, text: str, *, bold: bool = False, dim: bool = False) -> None:
    """Print one paragraph."""
    from rich.text import Text

    console.print(Text(broken(text, console.width), style="bold" if bold else "dim" if dim else ""))


def bullets(console: Console, title: str, lines: Iterable[str]) -> None:
    """Print a list under a title; nothing if it is empty."""
    from rich.text import Text

    lines = tuple(lines)
    if lines:
        say(console, title, bold=True)
        for line in lines:
            console.print(Text(broken(line, console.width, first="  - ", later="    ")))
        console.print()


# ------------------------------------------------------------------ where lines break


def tied(text: str) -> str:
    """Mark the blanks that no line may break at: between number and unit, and inside a range in brackets."""
    text = re.sub(r"(?<=[\d)]) (?=(%|h|min|s|d|pc|deg)(\W|$))", _TIE, text)
    return re.sub(r"\(([^\s()]+) to ([^\s()]+)\)", rf"(\1{_TIE}to{_TIE}\2)", text)


def broken(text: str, width: int, *, first: str = "", later: str = "") -> str:
    """Return text with line breaks so that it fits ``width`` characters."""
    lines = textwrap.wrap(
        tied(text), max(1, width), initial_indent=first, subsequent_indent=later, break_on_hyphens=False
    )
    return "\n".join(lines).replace(_TIE, " ")


def column_widths(table: TextTable, width: int) -> tuple[list[int], int]:
    """Widths of the columns, and the gap between them (2, or 1 where it is tight), to fit ``width`` characters.

    Where it can, no word is broken; numbers are broken last.
    """
    columns = [[tied(cell) for cell in (name, *(row[i] for row in table.rows))] for i, name in enumerate(table.columns)]
    natural = [max(1, *map(len, cells)) for cells in columns]
    if sum(natural) + 2 * (len(columns) - 1) <= width:
        return natural, 2
    least = []
    for i, cells in enumerate(columns):
        words = max(1, *(len(word) for cell in cells for word in cell.split(" ")))
        whole = max([1, words, *map(len, cells[1:])])
        least.append(whole if i in table.numbers else min(LONGEST_WHOLE, words))
        if i in table.numbers:
            natural[i] = whole  # a heading of several words may take several lines
    room = max(width - (len(columns) - 1), len(columns))
    while sum(least) > room:
        texts = [i for i in range(len(columns)) if i not in table.numbers and least[i] > SHORTEST_TEXT]
        least[max(texts or range(len(columns)), key=lambda i: least[i])] -= 1
    return _shared_out(least, natural, room - sum(least)), 1


def _shared_out(least: list[int], natural: list[int], spare: int) -> list[int]:
    """Share spare characters among columns: the smallest wishes are granted in full first."""
    wishes = [max(0, full - small) for full, small in zip(natural, least, strict=True)]
    found, order = list(least), sorted(range(len(least)), key=lambda i: wishes[i])
    for done, i in enumerate(order):
        given = min(wishes[i], spare // (len(order) - done))
        found[i] += given
        spare -= given
    return found
