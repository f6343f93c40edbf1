"""``lightlag windows``: where and when each target can be observed."""

from __future__ import annotations

from planner.cli.options import Figures, Folder, OneTarget


def windows(folder: Folder, target: OneTarget = None, figures: Figures = None) -> None:
    """Say where and when each target can be observed.

    Every hour of the season is left, or charged to the first limit that forbids it.

    Example: lightlag windows lightlag-demo
    """
    from planner import flow
    from planner.cli.show import bullets, say, screen, show
    from planner.cli.waiting import progress_bars
    from planner.errors import UnknownName
    from planner.report import tables
    from planner.report.words import plain

    campaign = flow.read_campaign(folder)
    names = [t.name for t in campaign.targets]
    if target is not None and target not in names:
        raise UnknownName(target, names, what="target", field="--target")
    with progress_bars() as progress:
        found = flow.windows(campaign, progress=progress)
    console = screen()
    show(console, tables.windows_season(found, target))
    for table in tables.windows_limits_by_month(found, target) if target else tables.windows_months(found):
        show(console, table)
    hints = [f"{t} with {s}: {text}" for t, s, text in flow.window_hints(campaign, found) if target in (None, t)]
    bullets(console, "Little time, and what would help", map(plain, hints))
    if figures is not None:
        from planner.report.gallery import write_figures

        with progress_bars() as progress:
            paths = write_figures(figures, windows=found, progress=progress)
        say(console, f"{len(paths)} figures in {figures}")
