"""``lightlag plan``: the looks that teach most within the time granted."""

from __future__ import annotations

from planner.cli.options import Folder, Seconds


def plan(folder: Folder, seconds: Seconds = 60.0) -> None:
    """Find the looks that teach most in the time granted.

    Writes plan.csv and plan.ecsv into the campaign folder. Says how far the plan can be from the best
    possible one, and the odds of every goal.

    Example: lightlag plan lightlag-demo --seconds 30
    """
    from planner import flow
    from planner.cli.outcome import refuse_impossible, show_plan
    from planner.cli.show import say, screen
    from planner.cli.waiting import progress_bars
    from planner.report.files import write_plan

    campaign = flow.read_campaign(folder)
    with progress_bars() as progress:
        found = flow.plan(campaign, seconds, progress=progress)
    refuse_impossible(found)
    paths = write_plan(found, campaign.folder)
    console = screen()
    show_plan(console, found)
    say(console, "written: " + ", ".join(map(str, paths)))
