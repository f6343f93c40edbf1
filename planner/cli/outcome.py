"""How a plan is shown on the terminal, and when it is not."""

from __future__ import annotations

from typing import TYPE_CHECKING

from planner.errors import PlanningError
from planner.records import Outcome, Plan

if TYPE_CHECKING:
    from rich.console import Console

MOST_LOOKS = 40  # rows on the terminal; the files hold all


def refuse_impossible(plan: Plan) -> None:
    """Raise PlanningError with the reasons where no plan keeps every limit."""
    if plan.outcome is Outcome.IMPOSSIBLE:
        why = "; ".join([*plan.notes, *(f"{target}: {text}" for target, text in plan.reasons.items())])
        raise PlanningError(f"no plan keeps every limit: {why or 'the solver gives no reason'}")


def show_plan(console: Console, plan: Plan) -> None:
    """Print looks, accounts, goals and what the plan is worth; the most important comes last."""
    from planner.cli.show import bullets, say, show
    from planner.report import tables
    from planner.report.words import SKY_CAUTIONS, headline, plain

    show(console, tables.looks_table(plan), most=MOST_LOOKS)
    show(console, tables.accounts_table(plan))
    if plan.reasons:
        show(console, tables.reasons_table(plan))
    bullets(console, "Notes", map(plain, plan.notes))
    bullets(console, "Cautions", SKY_CAUTIONS)
    show(console, tables.goals_table(plan))
    bullets(console, "Out of reach", tables.goal_remarks(plan))
    show(console, tables.plan_summary(plan))
    say(console, headline(plan) + ".", bold=True)
