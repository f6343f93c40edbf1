"""``lightlag windows`` says what would help where a target has little time."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest

from planner.cli import run

pytestmark = pytest.mark.filterwarnings("default::planner.sky.clock.EarthOrientationWarning")


def printed(capsys: Any, *arguments: str) -> str:
    assert run(["windows", *arguments]) == 0
    return " ".join(capsys.readouterr().out.split())


def test_the_demos_southern_target_is_sent_from_the_northern_site_to_the_southern_one(
    demo_folder: Path, capsys: Any
) -> None:
    text = printed(capsys, str(demo_folder))
    head = "Little time, and what would help"
    assert text.count(head) == 1
    hint = text.split(head)[1]
    assert "Brindle with brack-ridge/wide-camera: 0 h in the season" in hint
    assert "the same camera at Cairn South would have" in hint
    assert "Sallow with brack-ridge" not in hint  # it has time enough


def test_a_target_with_time_enough_gets_no_hint(demo_folder: Path, capsys: Any) -> None:
    assert "what would help" not in printed(capsys, str(demo_folder), "--target", "Tern")
