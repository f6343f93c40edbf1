"""``lightlag report``: everything on one page."""

from __future__ import annotations

from pathlib import Path

from planner.cli.options import Folder, PageFile, Seconds


def report(folder: Folder, to: PageFile = None, seconds: Seconds = 60.0) -> None:
    """Write everything as one HTML page.

    Forecasts, finds windows and plans; the page needs nothing from outside.

    Example: lightlag report lightlag-demo --to page.html
    """
    from planner import flow
    from planner.cli.outcome import refuse_impossible
    from planner.cli.show import say, screen
    from planner.cli.waiting import progress_bars
    from planner.report.page import write_page
    from planner.report.words import headline

    campaign = flow.read_campaign(folder)
    with progress_bars() as progress:
        found = flow.work(campaign, seconds=seconds, progress=progress)
        refuse_impossible(found.plan)
        path = write_page(
            to or Path(campaign.folder) / "page.html",
            campaign, found.forecast, found.windows, found.plan, found.understanding, progress=progress,
        )  # fmt: skip
    console = screen()
    say(console, headline(found.plan) + ".", bold=True)
    say(console, f"written: {path}")
