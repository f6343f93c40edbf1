"""Progress on stderr while work goes on; silent where stderr is no terminal."""

from __future__ import annotations

import contextlib
import sys
from collections.abc import Iterator

from planner.records import Progress, silent


@contextlib.contextmanager
def progress_bars() -> Iterator[Progress]:
    """Give a ``Progress`` that draws one bar a stage and leaves nothing behind."""
    if not sys.stderr.isatty():
        yield silent
        return
    from rich.console import Console
    from rich.progress import BarColumn, TaskProgressColumn, TextColumn, TimeElapsedColumn
    from rich.progress import Progress as Bars

    columns = (TextColumn("{task.description}", markup=False), BarColumn(), TaskProgressColumn(), TimeElapsedColumn())
    with Bars(*columns, console=Console(stderr=True), transient=True) as bars:
        tasks = {}

        def note(stage: str, share: float) -> None:
            if stage not in tasks:
                tasks[stage] = bars.add_task(stage, total=1.0)
            bars.update(tasks[stage], completed=min(1.0, max(0.0, share)))

        yield note
