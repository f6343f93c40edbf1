"""``lightlag check``: read a campaign, and say what was understood and what is assumed."""

from __future__ import annotations

from planner.cli.options import Folder


def check(folder: Folder) -> None:
    """Say what was understood, what is assumed, and give a first answer.

    Nothing is planned and nothing is written. Every default that the campaign leaves in place is listed
    with where it comes from.

    Example: lightlag check lightlag-demo
    """
    from planner import flow
    from planner.cli.show import bullets, say, screen, show
    from planner.report import tables
    from planner.report.words import plain

    campaign = flow.read_campaign(folder)
    found = flow.understood(campaign)
    console, season = screen(), campaign.file.season
    say(console, plain(campaign.name), bold=True)
    features = sum(len(t.features) for t in campaign.targets)
    counts = f"targets: {len(campaign.targets)}, features: {features}, setups: {len(campaign.setups)}"
    say(console, f"{counts}; evenings of {season.first} to {season.last}")
    console.print()
    show(console, tables.facts_table(found.facts))
    show(console, tables.assumptions_table(found.assumptions))
    for table in (tables.ties_table(found.ties), tables.answers_table(found.answers)):
        if table.rows:
            show(console, table)
    bullets(console, "Warnings", map(plain, found.warnings))
    say(console, "The campaign can be used.")
