"""Whole commands on the shipped, invented campaign."""

from __future__ import annotations

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path
from typing import Any

import pytest

from planner.cli import run
from planner.cli.demo import fresh_copy

# The demo's season may outlast the leap-second table of the day, which is a note to the user and no fault.
pytestmark = pytest.mark.filterwarnings("default::planner.sky.clock.EarthOrientationWarning")
COMMANDS = ("check", "forecast", "windows", "plan", "report", "demo")


@pytest.fixture(scope="module")
def finished(demo_run: Any) -> tuple[Path, str]:
    """The demo, run once for the whole suite: its folder and what it printed."""
    assert demo_run.code == 0, demo_run.errors
    notes = [line for line in demo_run.errors.splitlines() if line.strip()]
    assert all(line.startswith("lightlag: note: ") for line in notes), demo_run.errors
    return demo_run.folder, demo_run.output


def test_the_demo_writes_page_plan_and_figures(finished: tuple[Path, str]) -> None:
    folder, _ = finished
    names = {path.name for path in folder.iterdir()}
    assert {"campaign.yaml", "page.html", "plan.csv", "plan.ecsv", "figures"} <= names
    assert not [name for name in names if name.endswith(".part")]
    assert len(list((folder / "figures").glob("*.png"))) >= 3


def test_the_demo_says_what_it_reached_where_the_files_are_and_how_long_it_took(finished: tuple[Path, str]) -> None:
    _, text = finished
    for needed in ("Goals", "Accounts", "Looks", "best possible", "lightlag-demo/page.html", "lightlag-demo/plan.csv"):
        assert needed in text
    assert re.search(r"All of it took \d+\.\d s\.", text)
    assert max(map(len, text.splitlines())) <= 100


def test_the_plan_printed_is_the_plan_written(finished: tuple[Path, str]) -> None:
    from planner.report.files import read_plan

    folder, text = finished
    table = read_plan(folder)
    assert len(table) > 0
    assert f"{len(table)} looks " in text
    assert all(night in text for night in table["night"][:40])


def test_the_page_says_that_the_demo_is_invented(finished: tuple[Path, str]) -> None:
    assert "This campaign is invented" in (finished[0] / "page.html").read_text(encoding="utf-8")


def test_check_lists_assumptions_with_their_reasons(demo_folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["check", str(demo_folder)]) == 0
    out = capsys.readouterr().out
    assert "Assumed, because the campaign does not say" in out
    assert "common practice" in out
    assert "The campaign can be used." in out


def test_forecast_and_windows_print_every_target(
    demo_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    from planner.campaign.reading import read_campaign

    assert run(["forecast", str(demo_folder), "--figures", str(tmp_path / "pictures")]) == 0
    forecast = capsys.readouterr().out
    assert run(["windows", str(demo_folder)]) == 0
    windows = capsys.readouterr().out
    campaign = read_campaign(demo_folder)
    features = [f for t in campaign.targets for f in t.features]
    assert len(list((tmp_path / "pictures").glob("forecast-*.png"))) == len(features)
    # A cell may be broken over lines, so names are sought by their first word.
    assert all(f.name.split()[0] in forecast for f in features)
    assert all(t.name.split()[0] in windows for t in campaign.targets)


def test_an_unknown_target_names_the_nearest_one(demo_folder: Path, capsys: pytest.CaptureFixture[str]) -> None:
    from planner.campaign.reading import read_campaign

    name = read_campaign(demo_folder).targets[0].name
    assert run(["windows", str(demo_folder), "--target", name + "x"]) == 2
    assert f"did you mean {name!r}?" in capsys.readouterr().err


def test_a_missing_folder_is_one_line_on_stderr_and_code_2(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    for command in ("check", "forecast", "windows", "plan", "report"):
        assert run([command, str(tmp_path / "nowhere")]) == 2
        out, err = capsys.readouterr()
        assert out == ""
        assert err.startswith(f"lightlag: {tmp_path / 'nowhere'}")
        assert err.count("\n") == 1
        assert "Traceback" not in err


def test_bad_input_writes_nothing(demo_folder: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "copy"
    shutil.copytree(demo_folder, folder)
    text = (folder / "campaign.yaml").read_text()
    (folder / "campaign.yaml").write_text(text + "\nseasons: 4\n")
    before = sorted(os.listdir(folder))
    assert run(["plan", str(folder)]) == 2
    assert sorted(os.listdir(folder)) == before
    assert "campaign.yaml" in capsys.readouterr().err


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_an_example(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run([command, "--help"]) == 0
    assert f"Example: lightlag {command}" in capsys.readouterr().out


def test_the_overview_lists_every_command(capsys: pytest.CaptureFixture[str]) -> None:
    assert run(["--help"]) == 0
    out = capsys.readouterr().out
    assert all(re.search(rf"^  {command} ", out, flags=re.MULTILINE) for command in COMMANDS)
    assert "130" in " ".join(out.split())


@pytest.mark.parametrize(
    ("args", "said"),
    [(["plan"], "Missing argument"), (["plam", "x"], "No such command"), (["plan", "x", "--seconds", "0"], "seconds")],
)
def test_wrong_usage_is_code_2_and_says_what_is_wrong(
    args: list[str], said: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert run(args) == 2
    assert said in capsys.readouterr().err


def test_help_loads_no_heavy_library() -> None:
    """The overview must come at once: nothing that takes long to load may be imported for it."""
    code = (
        "import sys; from planner.cli import run; run(['--help']);"
        "heavy = ('numpy', 'scipy', 'astropy', 'matplotlib', 'pandas', 'ortools', 'pydantic', 'jinja2');"
        "print(','.join(m for m in heavy if m in sys.modules), file=sys.stderr)"
    )
    root = str(Path(__file__).resolve().parents[2])
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=root, check=True)
    assert done.stderr.strip() == ""


def test_a_second_demo_keeps_the_first(tmp_path: Path) -> None:
    first, second, third = (fresh_copy(tmp_path) for _ in range(3))
    assert [p.name for p in (first, second, third)] == ["lightlag-demo", "lightlag-demo-2", "lightlag-demo-3"]
    assert (third / "campaign.yaml").read_text() == (first / "campaign.yaml").read_text()
    assert os.access(first / "campaign.yaml", os.W_OK)
