"""lightlag: plans monitoring campaigns of light echoes and superluminal jet knots.

The public names are loaded on first use, so that importing the package does no work.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

_HOMES = {
    "read_campaign": "planner.campaign.reading",
    "forecast": "planner.flow",
    "windows": "planner.flow",
    "plan": "planner.flow",
    "Campaign": "planner.campaign.records",
    "Forecast": "planner.records",
    "Windows": "planner.records",
    "Plan": "planner.records",
    "LightlagError": "planner.errors",
    "InputError": "planner.errors",
}

__all__ = [
    "Campaign",
    "Forecast",
    "InputError",
    "LightlagError",
    "Plan",
    "Windows",
    "__version__",
    "forecast",
    "plan",
    "read_campaign",
    "windows",
]


def __getattr__(name: str) -> Any:
    if name == "__version__":
        from importlib.metadata import PackageNotFoundError, version

        try:
            return version("lightlag")
        except PackageNotFoundError:  # run from a source tree that was never installed
            return "0 (not installed)"
    if name in _HOMES:
        value = getattr(import_module(_HOMES[name]), name)
        globals()[name] = value
        return value
    raise AttributeError(f"module 'planner' has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
