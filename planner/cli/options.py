"""Arguments and options that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

Folder = Annotated[Path, typer.Argument(metavar="DIR", help="Campaign folder (it holds campaign.yaml).")]
Seconds = Annotated[
    float, typer.Option(min=1.0, metavar="N", help="Longest time for the search, in seconds of the clock.")
]
Figures = Annotated[Path | None, typer.Option(metavar="DIR", help="Also write PNG figures into this folder.")]
OneTarget = Annotated[str | None, typer.Option(metavar="NAME", help="Only this target, month by month.")]
PageFile = Annotated[Path | None, typer.Option("--to", metavar="FILE", help="Page to write [default: DIR/page.html].")]
