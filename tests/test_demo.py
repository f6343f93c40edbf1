"""The demo as a user meets it: one run of the real command in an empty folder, with every socket refused."""

from __future__ import annotations

import csv
import datetime as dt
import itertools
import os
import re
import shutil
import socket
import struct
import subprocess
import sys
import warnings
from collections import defaultdict
from html.parser import HTMLParser
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
import yaml

from planner.cli import run
from planner.errors import InputError
from planner.records import PLAN_COLUMNS, Outcome
from planner.report.files import read_plan

if TYPE_CHECKING:
    from tests.conftest import DemoRun

ROOT = Path(__file__).resolve().parent.parent
WRITTEN = dt.date(2026, 12, 1)  # the day this file was written: the demo's season was to come


@pytest.fixture(scope="session")
def rows(demo_run: DemoRun) -> list[dict[str, Any]]:
    """The written plan, one dict a look, read by the plain csv module."""
    with open(demo_run.folder / "plan.csv", newline="", encoding="utf-8") as file:
        return list(csv.DictReader(file))


def moment(text: str) -> dt.datetime:
    assert text.endswith("Z")
    return dt.datetime.fromisoformat(text)


def hours_of(row: dict[str, Any]) -> float:
    return (moment(row["end_utc"]) - moment(row["start_utc"])) / dt.timedelta(hours=1)


# ------------------------------------------------------------------ the run


def test_the_demo_ends_well_and_tells_nothing_but_notes(demo_run: DemoRun) -> None:
    assert demo_run.code == 0
    assert all(line.startswith("lightlag: note: ") for line in demo_run.errors.splitlines()), demo_run.errors


def test_the_demo_never_tries_the_network(demo_run: DemoRun) -> None:
    assert demo_run.asked_network == ()


def test_the_refusal_of_sockets_works(socket_guard: Any) -> None:
    """Otherwise the test above could not fail; an attempt that swallows the refusal is still seen."""
    with socket_guard() as asked:
        for attempt in (
            lambda: socket.create_connection(("localhost", 9)),
            lambda: socket.getaddrinfo("localhost", 9),
            socket.socket,
        ):
            with pytest.raises(RuntimeError, match=r"socket was opened|was called"):
                attempt()
        assert len(asked) == 3
    socket.socket().close()  # and is over afterwards


def test_the_season_of_the_demo_is_to_come(demo_run: DemoRun) -> None:
    season = demo_run.results.campaign.file.season
    assert season.first > WRITTEN
    assert season.last > season.first


# ------------------------------------------------------------------ files


def png_size(data: bytes) -> tuple[int, int]:
    """Width and height from the header (PNG specification, W3C 2003, section 11.2.2)."""
    assert data[:8] == b"\x89PNG\r\n\x1a\n"
    width, height = struct.unpack(">II", data[16:24])
    return width, height


def test_page_plan_and_figures_are_there_and_not_empty(demo_run: DemoRun) -> None:
    folder = demo_run.folder
    assert (folder / "page.html").stat().st_size > 50_000  # holds its figures
    for name in ("plan.csv", "plan.ecsv"):
        assert (folder / name).stat().st_size > 1_000
    figures = sorted((folder / "figures").glob("*.png"))
    features = sum(len(target.features) for target in demo_run.results.campaign.targets)
    assert len(figures) > features  # one a feature, and the season
    for figure in figures:
        width, height = png_size(figure.read_bytes())
        assert width >= 400
        assert height >= 200


def test_the_copy_of_the_campaign_is_the_shipped_one(demo_run: DemoRun, demo_folder: Path) -> None:
    for source in demo_folder.glob("*.yaml"):
        assert (demo_run.folder / source.name).read_bytes() == source.read_bytes()


class Links(HTMLParser):
    """Everything that a browser would load or follow, and the text of styles."""

    def __init__(self) -> None:
        super().__init__()
        self.found: list[tuple[str, str, str]] = []
        self.tags: set[str] = set()

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        self.found += [
            (tag, key, value or "")
            for key, value in attrs
            if key in ("src", "href", "srcset", "data", "action", "poster", "background", "xlink:href")
        ]


def outside(html: str) -> list[str]:
    """What of a page lies outside it: links that are neither inside the page nor data, loading styles, scripts."""
    reader = Links()
    reader.feed(html)
    found = [f"{tag} {key}={v[:60]}" for tag, key, v in reader.found if not v.startswith(("#", "data:"))]
    styles = re.findall(r"url\(\s*['\"]?(?!data:|#)[^)]*\)|@import[^;]*", html)
    return found + styles + [tag for tag in ("script", "iframe", "object", "embed") if tag in reader.tags]


def test_the_page_needs_nothing_from_outside(demo_run: DemoRun) -> None:
    html = (demo_run.folder / "page.html").read_text(encoding="utf-8")
    assert outside(html) == []
    assert html.count("data:image/") >= 3


@pytest.mark.parametrize(
    "html",
    [
        '<img src="https://example.org/a.png">',
        '<link rel="stylesheet" href="//example.org/a.css">',
        '<a href="http://example.org">x</a>',
        '<img src="figures/a.png">',
        "<style>@import 'a.css';</style>",
        "<style>p {background: url(http://example.org/a.png)}</style>",
        "<script>fetch('x')</script>",
    ],
)
def test_a_page_that_needs_something_is_noticed(html: str) -> None:
    assert outside(html)


# ------------------------------------------------------------------ the plan


def test_no_plan_is_worth_more_than_the_best_possible(demo_run: DemoRun) -> None:
    plan = demo_run.results.plan
    assert 0.0 < plan.value <= plan.best_possible * (1 + 1e-9)  # round-off
    assert plan.value <= plan.proof_value * (1 + 1e-9)  # the plan handed out gives up some for what it realises
    assert 0.0 <= plan.shortfall < 1.0
    assert plan.shortfall == pytest.approx(1.0 - plan.value / plan.best_possible, abs=1e-12)


def test_the_plan_handed_out_gives_up_at_most_one_percent_of_the_best_found(demo_run: DemoRun) -> None:
    """That is the whole price of choosing by what is realised."""
    plan = demo_run.results.plan
    assert plan.value >= 0.99 * plan.proof_value * (1 - 1e-9)


def test_the_demo_is_solved_to_within_one_percent_of_the_bound(demo_run: DemoRun) -> None:
    plan = demo_run.results.plan
    assert plan.outcome is not Outcome.IMPOSSIBLE
    assert plan.proof_shortfall <= 0.01
    assert plan.shortfall <= 0.02  # the plan handed out gives up 1 % more at most


def test_the_written_plan_reads_back_with_all_columns_and_facts(demo_run: DemoRun, rows: list[dict[str, Any]]) -> None:
    table, plan = read_plan(demo_run.folder), demo_run.results.plan
    assert tuple(table.colnames) == PLAN_COLUMNS
    assert len(table) == len(rows) == len(plan.looks) > 5
    frame = plan.table()
    for name in PLAN_COLUMNS:
        written, told = list(table[name]), list(frame[name])
        if name in ("airmass", "moon_separation_deg"):
            assert written == pytest.approx(told, nan_ok=True)
        else:
            assert written == told
    assert table["exposure_s"].unit == "s"
    assert table.meta["best_possible"] == plan.best_possible
    assert table.meta["odds"] == plan.odds


def test_a_folder_without_a_plan_is_an_error_with_its_remedy(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="there is no plan yet; run `lightlag plan`"):
        read_plan(tmp_path)


def test_the_hours_of_every_purse_are_within_its_grant(demo_run: DemoRun, rows: list[dict[str, Any]]) -> None:
    """Counted here from the written file: hours by setup and programme, against campaign.yaml as plain text."""
    campaign = demo_run.results.campaign.file
    programme_of = {
        target.name: demo_run.results.campaign.programme_of(target).name for target in demo_run.results.campaign.targets
    }
    used: dict[tuple[str, str], float] = defaultdict(float)
    granted: dict[tuple[str, str], float] = defaultdict(float)
    for row in rows:
        used[row["setup"], programme_of[row["target"]]] += hours_of(row)
    for allocation in campaign.allocations:
        granted[allocation.setup, allocation.programme] += allocation.hours
    assert used.keys() <= granted.keys()
    slack = len(rows) / 3600.0  # times are written to the second
    assert {key: hours for key, hours in used.items() if hours > granted[key] + slack} == {}

    told: dict[tuple[str, str], float] = defaultdict(float)
    for account in demo_run.results.plan.accounts:
        assert account.planned_hours <= account.granted_hours + 1e-9
        told[account.setup, account.programme] += account.planned_hours
    for key, hours in told.items():
        assert used[key] == pytest.approx(hours, abs=slack)


def test_looks_of_one_telescope_never_overlap_and_lie_in_the_season(
    demo_run: DemoRun, rows: list[dict[str, Any]]
) -> None:
    season = demo_run.results.campaign.file.season
    last_end: dict[str, dt.datetime] = {}
    for row in sorted(rows, key=lambda row: row["start_utc"]):
        telescope = demo_run.results.campaign.setup(row["setup"]).telescope
        start, end = moment(row["start_utc"]), moment(row["end_utc"])
        assert start < end
        assert start >= last_end.get(telescope, start)
        last_end[telescope] = end
        assert season.first <= dt.date.fromisoformat(row["night"]) <= season.last
        assert abs(start.date() - dt.date.fromisoformat(row["night"])) <= dt.timedelta(days=1)
        assert float(row["exposure_s"]) <= (end - start).total_seconds() + 1.0


def test_looks_of_one_target_keep_their_distance(demo_run: DemoRun, rows: list[dict[str, Any]]) -> None:
    """Counted in nights, as the recount does."""
    nights: dict[str, list[dt.date]] = defaultdict(list)
    for row in rows:
        nights[row["target"]].append(dt.date.fromisoformat(row["night"]))
    several = 0
    for target in demo_run.results.campaign.targets:
        mine = sorted(nights[target.name])
        gaps = [(b - a).days for a, b in itertools.pairwise(mine)]
        several += len(gaps)
        assert all(gap >= target.spacing.at_least_days for gap in gaps), (target.name, gaps)
    assert several > 0


def test_time_is_so_scarce_that_the_solver_had_to_choose(demo_run: DemoRun) -> None:
    plan = demo_run.results.plan
    assert any(account.planned_hours > 0.9 * account.granted_hours for account in plan.accounts)
    # and what the season offers is many times what is granted
    offered = sum(demo_run.results.windows.minutes) / 60.0
    assert offered > 10 * sum(account.granted_hours for account in plan.accounts)


# ------------------------------------------------------------------ goals


def test_a_goal_that_nothing_can_reach_is_said_to_be_out_of_reach(demo_run: DemoRun) -> None:
    lost = [g for g in demo_run.results.plan.goals if "nothing you can schedule reaches" in g.remark]
    assert lost
    for goal in lost:
        assert goal.everything > goal.wanted
        assert not goal.reached
        assert f"every slot of the season together gives {goal.everything:.3g}" in goal.remark
    tied = next(g for g in lost if g.goal.startswith("distance_pc"))
    assert "ask for depth_over_distance2" in tied.remark  # a remedy, not only a refusal
    output = " ".join(demo_run.output.split())
    assert "Out of reach" in output
    assert "nothing you can schedule reaches" in output


def test_what_is_reached_is_not_called_out_of_reach(demo_run: DemoRun) -> None:
    assert any(goal.reached for goal in demo_run.results.plan.goals)
    for goal in demo_run.results.plan.goals:
        if goal.reached:
            assert goal.remark == ""


def test_a_goal_counts_as_reached_by_its_simulated_odds_alone(demo_run: DemoRun) -> None:
    goals = demo_run.results.plan.goals
    assert any(goal.reached for goal in goals)
    for goal in goals:
        assert 0.0 <= goal.odds <= 1.0
        assert goal.reached == (goal.odds >= goal.odds_wanted)
        # counting error of odds from n seasons is sqrt(p q / n); at least some hundred seasons were simulated
        assert goal.odds_error <= 0.5 / 200**0.5


def test_the_plan_says_of_every_goal_of_the_campaign_what_it_does(demo_run: DemoRun) -> None:
    stated = sum(len(f.goals) for t in demo_run.results.campaign.targets for f in t.features)
    assert len(demo_run.results.plan.goals) == stated == len(demo_run.results.plan.odds)


def test_every_target_without_a_look_has_a_reason(demo_run: DemoRun, rows: list[dict[str, Any]]) -> None:
    taken = {row["target"] for row in rows}
    names = {target.name for target in demo_run.results.campaign.targets}
    assert set(demo_run.results.plan.reasons) == names - taken


def test_precision_with_every_slot_is_at_least_as_good_as_with_the_plan(demo_run: DemoRun) -> None:
    """More looks cannot teach less; 3 % for the draws (odds and reach are figured from different ones)."""
    for goal in demo_run.results.plan.goals:
        if goal.unit != "epochs":
            assert goal.everything <= goal.expected * 1.03, goal


# ------------------------------------------------------------------ again


@pytest.fixture(scope="module")
def twins(demo_folder: Path, tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Path]:
    """One half of the demo (its echoes), planned twice, in two processes side by side.

    Texts hash differently in the two, so that an answer that hangs on the order of a set would differ.
    """
    root, folders, runs = tmp_path_factory.mktemp("twins"), [], []
    data = yaml.safe_load((demo_folder / "campaign.yaml").read_text(encoding="utf-8"))
    for key, word in (("programmes", "name"), ("allocations", "programme")):
        data[key] = [entry for entry in data[key] if entry[word] == "echoes"]
    for number in (1, 2):
        folder = root / f"twin-{number}"
        shutil.copytree(demo_folder, folder)
        (folder / "campaign.yaml").write_text(yaml.safe_dump(data), encoding="utf-8")
        folders.append(folder)
        runs.append(
            subprocess.Popen(
                [sys.executable, "-m", "planner", "plan", str(folder), "--seconds", "300"], cwd=ROOT,
                env={**os.environ, "PYTHONHASHSEED": str(number)}, stdout=subprocess.PIPE, stderr=subprocess.STDOUT,
            )
        )  # fmt: skip
    told = [process.communicate()[0].decode() for process in runs]  # both end before anything is judged
    assert [process.returncode for process in runs] == [0, 0], told
    return folders[0], folders[1]


@pytest.mark.parametrize("name", ["plan.csv", "plan.ecsv"])
def test_a_second_plan_with_the_same_seed_is_the_same_to_the_last_byte(twins: tuple[Path, Path], name: str) -> None:
    """Looks, starts, values, bound and odds: all of them stand in the files."""
    one, two = ((folder / name).read_bytes() for folder in twins)
    assert len(one) > 1000
    assert one == two
    outcome = read_plan(twins[0]).meta["outcome"]
    assert outcome != Outcome.STOPPED.value  # else the clock would have had a say


# ------------------------------------------------------------------ check


@pytest.fixture(scope="module")
def checked(demo_run: DemoRun) -> str:
    """What ``lightlag check`` says of the demo, white space run together (cells break over lines)."""
    import contextlib
    import io

    from planner.sky.clock import EarthOrientationWarning

    before = {path: path.stat().st_mtime_ns for path in demo_run.folder.rglob("*")}
    out = io.StringIO()
    with warnings.catch_warnings(), contextlib.redirect_stdout(out), pytest.MonkeyPatch.context() as patch:
        warnings.simplefilter("default", EarthOrientationWarning)
        patch.setenv("COLUMNS", "400")  # so wide that no cell is broken
        assert run(["check", str(demo_run.folder)]) == 0
    assert {path: path.stat().st_mtime_ns for path in demo_run.folder.rglob("*")} == before  # it writes nothing
    return " ".join(out.getvalue().split())


def test_check_says_what_was_understood(checked: str, demo_run: DemoRun) -> None:
    campaign = demo_run.results.campaign
    features = sum(len(target.features) for target in campaign.targets)
    assert campaign.name in checked
    assert f"targets: {len(campaign.targets)}, features: {features}, setups: {len(campaign.setups)}" in checked
    assert f"evenings of {campaign.file.season.first} to {campaign.file.season.last}" in checked
    assert "The campaign can be used." in checked


def test_check_says_what_is_assumed_and_why(checked: str) -> None:
    assert "Assumed, because the campaign does not say" in checked
    assert "common practice" in checked
    assert "least_stations" not in checked  # stated in the array's profile, hence not assumed


def test_check_gives_a_first_answer_for_every_feature(checked: str, demo_run: DemoRun) -> None:
    _, found, rest = checked.partition("First answers")
    answers = rest.partition("Assumed, because")[0]
    assert found
    for target in demo_run.results.campaign.targets:
        for feature in target.features:
            assert feature.name in answers
    assert re.search(r"\d", answers)


def test_check_says_what_hangs_together(checked: str) -> None:
    """Depth and distance of a ring are tied; a user who asks for one of them must learn it before the season."""
    assert "What hangs together" in checked
