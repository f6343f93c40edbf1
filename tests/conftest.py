"""Fixtures that several rooms share: the shipped campaigns, read once, and the demo, run once without a network."""

from __future__ import annotations

import contextlib
import io
import os
import socket
import warnings
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest
from hypothesis import settings

from planner.campaign.reading import read_campaign
from planner.campaign.records import Campaign

if TYPE_CHECKING:
    from planner.flow import Results

# No example is timed (machines differ); on a CI machine the examples are the same every time, so that a rare one is
# found where somebody can look at it.
settings.register_profile("untimed", deadline=None)
settings.register_profile("ci", deadline=None, derandomize=True)
settings.load_profile("ci" if os.environ.get("CI") else "untimed")

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


# ------------------------------------------------------------------ the demo, once, without a network


class NetworkTried(RuntimeError):
    """Something asked for a socket or an address while neither may be had."""


@contextlib.contextmanager
def no_network() -> Iterator[list[str]]:
    """Refuse every socket and look-up; the list tells what was asked for, also where the refusal was swallowed."""
    import ssl  # noqa: F401  (it derives a class from socket.socket: that must be the real one)

    asked: list[str] = []

    class Refused(socket.socket):
        def __init__(self, *args: Any, **kwargs: Any) -> None:
            asked.append("socket")
            raise NetworkTried("a socket was opened")

    def refuse(name: str) -> Any:
        def inner(*args: Any, **kwargs: Any) -> Any:
            asked.append(f"{name}{args!r}")
            raise NetworkTried(f"{name} was called with {args!r}")

        return inner

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(socket, "socket", Refused)
        for name in ("create_connection", "getaddrinfo", "gethostbyname"):
            patch.setattr(socket, name, refuse(name))
        yield asked


@pytest.fixture
def socket_guard() -> Callable[[], contextlib.AbstractContextManager[list[str]]]:
    """The refusal of sockets itself, so that it can be tested."""
    return no_network


@dataclass(frozen=True)
class DemoRun:
    """What one run of ``lightlag demo`` left behind."""

    code: int
    output: str
    errors: str
    folder: Path  # the copy of the campaign, with page, plan and figures
    results: Results  # the records that the command made on its way
    asked_network: tuple[str, ...]


# Far above what the proof needs, so that nothing tested here hangs on the clock. A limit, not a timing.
DEMO_SECONDS = 120


@pytest.fixture(scope="session")
def demo_run(tmp_path_factory: pytest.TempPathFactory) -> DemoRun:
    """Run the real demo command once in an empty folder, in this process, with every socket refused."""
    from planner import flow
    from planner.cli import run
    from planner.sky.clock import EarthOrientationWarning

    where = tmp_path_factory.mktemp("demo")
    kept: list[Results] = []
    real = flow.work

    def work(*args: Any, **kwargs: Any) -> Results:
        kept.append(real(*args, **kwargs))
        return kept[-1]

    out, err = io.StringIO(), io.StringIO()
    with pytest.MonkeyPatch.context() as patch, warnings.catch_warnings(), no_network() as asked:
        # The season may outlast the leap-second table of the day, which is a note to the user and no fault.
        warnings.simplefilter("default", EarthOrientationWarning)
        patch.chdir(where)
        patch.setenv("COLUMNS", "100")
        patch.setattr(flow, "work", work)
        with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
            code = run(["demo", "--seconds", str(DEMO_SECONDS)])
    assert code == 0, f"lightlag demo ended with code {code}: {err.getvalue()}{out.getvalue()}"
    assert len(kept) == 1
    return DemoRun(code, out.getvalue(), err.getvalue(), where / "lightlag-demo", kept[0], tuple(asked))
