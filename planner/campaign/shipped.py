"""Where shipped campaigns and site profiles lie: inside an installed package, or beside the source tree."""

from __future__ import annotations

from pathlib import Path
from typing import Literal

from planner.errors import InputError

Kind = Literal["targets", "site_profiles"]


def shipped_folder(kind: Kind, package: Path | None = None) -> Path:
    """Return the folder of shipped ``targets`` or ``site_profiles``.

    ``package``: the folder of the package ``planner`` (the one this file belongs to, if left out).
    Raises InputError when the folder is in neither place.
    """
    package = package or Path(__file__).resolve().parents[1]
    inside, beside = package / "shipped" / kind, package.parent / kind
    if inside.is_dir():
        return inside
    # Beside an installed package lie other people's folders, which may bear the same name.
    if beside.is_dir() and (package.parent / "pyproject.toml").is_file():
        return beside
    raise InputError(
        f"the shipped folder {kind!r} is missing; install lightlag again, or work in its source tree",
        value=kind,
        allowed=f"{inside} or {beside}",
    )
