"""Fixtures that several rooms share: the shipped campaigns, read once."""

from __future__ import annotations

from pathlib import Path

import pytest

from planner.campaign.reading import read_campaign
from planner.campaign.records import Campaign

ROOT = Path(__file__).resolve().parent.parent


@pytest.fixture(scope="session")
def demo_folder() -> Path:
    return ROOT / "targets" / "demo"


@pytest.fixture(scope="session")
def demo_campaign(demo_folder: Path) -> Campaign:
    return read_campaign(demo_folder)


@pytest.fixture(scope="session")
def sn1987a_campaign() -> Campaign:
    return read_campaign(ROOT / "tests" / "published" / "sn1987a")
