"""``lightlag demo``: everything once, on the shipped invented campaign."""

from __future__ import annotations

import time
from pathlib import Path

from planner.cli.options import Seconds


def demo(seconds: Seconds = 60.0) -> None:
    """Run everything on the shipped, invented campaign.

    Copies it to ./lightlag-demo and writes the page, the plan and the figures there. An earlier copy is
    kept: the new one gets a number.

    Example: lightlag demo
    """
    from planner import flow
    from planner.cli.outcome import refuse_impossible, show_plan
    from planner.cli.show import say, screen
    from planner.cli.waiting import progress_bars
    from planner.report.files import write_plan
    from planner.report.gallery import write_figures
    from planner.report.page import write_page

    began = time.perf_counter()
    folder = fresh_copy(Path.cwd())
    campaign = flow.read_campaign(folder)
    with progress_bars() as progress:
        found = flow.work(campaign, seconds=seconds, progress=progress)
        refuse_impossible(found.plan)
        facts = (found.forecast, found.windows, found.plan)
        paths = [write_page(folder / "page.html", campaign, *facts, found.understanding, progress=progress)]
        paths += write_plan(found.plan, folder)
        pictures = write_figures(folder / "figures", *facts, progress=progress)
    console = screen()
    show_plan(console, found.plan)
    console.print()
    shown = [str(path.relative_to(Path.cwd())) for path in paths]
    say(
        console,
        f"Open {shown[0]}. Also written: {', '.join(shown[1:])} and {len(pictures)} figures in {folder.name}/figures.",
    )
    say(console, f"All of it took {time.perf_counter() - began:.1f} s.")


def fresh_copy(where: Path) -> Path:
    """Copy the demo campaign into ``lightlag-demo``, or -2, -3, ... if that is taken; return the new folder."""
    import shutil

    from planner.campaign.shipped import shipped_folder

    source, count = shipped_folder("targets") / "demo", 1
    while True:
        folder = where / ("lightlag-demo" if count == 1 else f"lightlag-demo-{count}")
        try:
            folder.mkdir()
        except FileExistsError:
            count += 1
            continue
        # copyfile, so that a read-only installation does not make a read-only copy
        shutil.copytree(source, folder, copy_function=shutil.copyfile, dirs_exist_ok=True)
        return folder
