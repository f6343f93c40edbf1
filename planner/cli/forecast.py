"""``lightlag forecast``: when each feature can be measured."""

from __future__ import annotations

from planner.cli.options import Figures, Folder


def forecast(folder: Folder, figures: Figures = None) -> None:
    """Forecast every observable, and when it can be measured.

    Shown are medians with 16 to 84 %, at start, middle and end of the season.

    Example: lightlag forecast lightlag-demo --figures pictures
    """
    from planner import flow
    from planner.cli.show import bullets, say, screen, show
    from planner.cli.waiting import progress_bars
    from planner.report import tables

    campaign = flow.read_campaign(folder)
    with progress_bars() as progress:
        found = flow.forecast(campaign, progress=progress)
    console = screen()
    show(console, tables.forecast_values(found))
    show(console, tables.forecast_measurable(found))
    for table in (tables.forecast_derived(found), tables.forecast_spacings(found)):
        if table.rows:
            show(console, table)
    bullets(console, "Where the model is strained", tables.forecast_warnings(found))
    if figures is not None:
        from planner.report.gallery import write_figures

        with progress_bars() as progress:
            paths = write_figures(figures, found, progress=progress)
        say(console, f"{len(paths)} figures in {figures}")
