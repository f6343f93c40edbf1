"""Figures as files."""

from __future__ import annotations

from pathlib import Path

from report_records import make_forecast, make_plan, make_windows

from planner.report.gallery import write_figures


def test_one_picture_a_feature_a_target_and_a_calendar(tmp_path: Path) -> None:
    paths = write_figures(tmp_path / "new" / "figures", make_forecast(), make_windows(), make_plan())
    names = [path.name for path in paths]
    assert names == [
        "forecast-reed-ring.png", "forecast-heron-k1.png", "windows-reed.png", "windows-heron.png", "calendar.png",
    ]  # fmt: skip
    assert all(path.read_bytes().startswith(b"\x89PNG") for path in paths)


def test_windows_alone_can_be_drawn(tmp_path: Path) -> None:
    assert [path.name for path in write_figures(tmp_path, windows=make_windows())] == [
        "windows-reed.png",
        "windows-heron.png",
    ]
