"""One thin file per command."""

from __future__ import annotations

from planner.cli.app import run

__all__ = ["run"]
