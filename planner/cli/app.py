"""The command line: parses, calls one function of ``flow``, prints, returns a code."""

from __future__ import annotations

import sys
from typing import Annotated

import typer

from planner.cli.check import check
from planner.cli.codes import INTERRUPTED, guarded
from planner.cli.demo import demo
from planner.cli.forecast import forecast
from planner.cli.plan import plan
from planner.cli.report import report
from planner.cli.windows import windows

app = typer.Typer(
    name="lightlag", add_completion=False, no_args_is_help=True, rich_markup_mode=None,
    pretty_exceptions_enable=False, context_settings={"help_option_names": ["-h", "--help"]},
)  # fmt: skip
for command in (check, forecast, windows, plan, report, demo):
    app.command()(guarded(command))


def _version(wanted: bool) -> None:
    if wanted:
        from importlib.metadata import PackageNotFoundError, version

        try:
            print(f"lightlag {version('lightlag')}")
        except PackageNotFoundError:  # run from a source tree that was never installed
            print("lightlag (not installed)")
        raise typer.Exit


@app.callback()
def lightlag(
    version: Annotated[
        bool, typer.Option("--version", help="Show the version and stop.", callback=_version, is_eager=True)
    ] = False,
) -> None:
    """Plan monitoring campaigns of light echoes and superluminal jet knots.

    Start with `lightlag demo`, or with `lightlag check DIR` on a campaign folder of your own.

    Exit codes: 0 done, 2 the input cannot be used, 3 no plan can be given, 130 interrupted.
    """


def run(args: list[str]) -> int:
    """Run one command line and return its exit code; messages go to stdout and stderr."""
    try:
        app(args=args, prog_name="lightlag", standalone_mode=True)
    except SystemExit as stop:
        return _code(stop)
    except KeyboardInterrupt:
        return INTERRUPTED
    return 0


def _code(stop: SystemExit) -> int:
    if stop.code is None or isinstance(stop.code, int):
        return stop.code or 0
    print(stop.code, file=sys.stderr)
    return 1
