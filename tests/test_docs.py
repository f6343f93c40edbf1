"""The pages keep their word: set-up commands, commands and their help, no trace of a machine, invented data says so."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest
import typer.main
import yaml

from planner.cli import run
from planner.cli.app import app

ROOT = Path(__file__).resolve().parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
COMMANDS = sorted(typer.main.get_command(app).commands)  # type: ignore[attr-defined]

# ------------------------------------------------------------------ set-up


def setup_lines(text: str) -> list[tuple[str, str]]:
    """The lines that .ci/run and people copy: ``run: `...` `` and ``test: `...` ``, in order."""
    return re.findall(r"^(run|test): `(.*)`$", text, flags=re.MULTILINE)


def test_the_readme_shows_exactly_the_two_set_up_commands() -> None:
    assert setup_lines(README) == [
        ("run", "python3 -m venv .venv && .venv/bin/pip install . && .venv/bin/lightlag demo"),
        ("test", "python3 -m venv .venv && .venv/bin/pip install '.[test]' && .venv/bin/python -m pytest"),
    ]


def test_set_up_lines_are_seen_wherever_they_stand_alone_on_a_line() -> None:
    assert setup_lines("x\nrun: `a b`\ny\ntest: `c`\nrun: `d`\n") == [("run", "a b"), ("test", "c"), ("run", "d")]
    assert setup_lines("say run: `a`\nrun: a\n") == []


def test_continuous_integration_takes_the_test_command_from_the_readme() -> None:
    script = (ROOT / ".ci" / "run").read_text(encoding="utf-8")
    assert "README.md" in script
    assert "pytest" not in script  # a second copy could drift


# ------------------------------------------------------------------ commands


def test_there_are_commands() -> None:
    assert {"check", "forecast", "windows", "plan", "report", "demo"} <= set(COMMANDS)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_stands_in_the_readme(command: str) -> None:
    assert re.search(rf"\blightlag {command}\b", README)


def test_the_readme_names_no_command_that_does_not_exist() -> None:
    """Only inside code: in prose "lightlag plans ..." is a sentence."""
    code = re.findall(r"```.*?```|`[^`\n]+`", README, flags=re.DOTALL)
    named = {name for part in code for name in re.findall(r"\blightlag ([a-z][\w-]*)", part)}
    assert named <= set(COMMANDS)


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_has_help_with_an_example_of_itself(command: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert run([command, "--help"]) == 0
    text = capsys.readouterr().out
    assert re.search(rf"Example: lightlag {command}\b", text)
    assert len(text.split()) > 30  # more than a usage line


# ------------------------------------------------------------------ no trace of a machine

# Written in pieces, since this file is read too.
TRACES = {
    "a home folder": r"/(?:home|Users|root)" + r"/[\w.]",
    "a work folder": r"(?<![\w.])/(?:work|tmp|workspace|mnt)" + r"/\w",
    "a drive": r"\b[C-Z]:" + r"\\\w",
    "a registry host": "|".join(
        name + r"\." + end
        for name, end in (("py" + "pi", "org"), ("python" + "hosted", "org"), ("npm" + "js", "org"),
                          ("proxy.golang", "org"), ("crates", "io"), ("anaconda", "(?:org|com)"))
    ),
    "a folder outside": r"\.\./" + r"shared",
    "a conversation": r"(?i)\btran" + r"scripts?\b",
}  # fmt: skip


def traces(text: str) -> list[str]:
    """What in a text betrays the machine or the manner in which it was made."""
    return [f"{what}: {found.group()}" for what, how in TRACES.items() for found in re.finditer(how, text)]


def own_files() -> list[Path]:
    """Files under version control, with those about to be; without version control, everything but build products."""
    listing = ["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"]
    try:
        done = subprocess.run(listing, cwd=ROOT, capture_output=True, check=True)
        found = [ROOT / name for name in done.stdout.decode().split("\0") if name]
    except (OSError, subprocess.CalledProcessError):
        folders = ("planner", "targets", "site_profiles", "tests", ".ci")
        found = [path for folder in folders for path in (ROOT / folder).rglob("*")] + list(ROOT.glob("*.*"))
        found = [path for path in found if "__pycache__" not in path.parts]
    return [path for path in found if path.is_file()]


def test_no_file_betrays_a_machine_or_a_registry() -> None:
    files = own_files()
    assert {"README.md", "pyproject.toml"} <= {path.name for path in files}
    found = {str(path.relative_to(ROOT)): traces(path.read_bytes().decode("utf-8", errors="ignore")) for path in files}
    assert {name: what for name, what in found.items() if what} == {}


@pytest.mark.parametrize(
    ("text", "what"),
    [
        ("see /ho" + "me/ann/x", "a home folder"),
        ("see /ro" + "ot/x", "a home folder"),
        ("open('/wo" + "rk/main/x')", "a work folder"),
        ("open('/t" + "mp/x')", "a work folder"),
        ("C:" + "\\Users\\ann", "a drive"),
        ("https://py" + "pi.org/simple", "a registry host"),
        ("files.python" + "hosted.org", "a registry host"),
        ("from ../sha" + "red/design", "a folder outside"),
        ("see the Tran" + "script", "a conversation"),
    ],
)
def test_a_trace_is_found(text: str, what: str) -> None:
    assert [one.partition(":")[0] for one in traces(text)] == [what]


@pytest.mark.parametrize(
    "text", ["brack-ridge/wide-camera", "targets/demo", "frame/work/x", "site/root", "a manuscript", "J/A+A/1 and 1/2"]
)
def test_ordinary_text_is_no_trace(text: str) -> None:
    assert traces(text) == []


# ------------------------------------------------------------------ invented data

SHIPPED = sorted([*(ROOT / "targets").rglob("*.yaml"), *(ROOT / "site_profiles").glob("*.yaml")])


def says_invented(text: str) -> bool:
    """True when a file of the user's kind says at its top level that it is invented."""
    data = yaml.safe_load(text)
    return isinstance(data, dict) and data.get("invented") is True


def test_there_are_shipped_files() -> None:
    assert {"campaign.yaml", "sallow.yaml", "brack-ridge.yaml"} <= {path.name for path in SHIPPED}


@pytest.mark.parametrize("path", SHIPPED, ids=lambda path: str(path.relative_to(ROOT)))
def test_every_shipped_file_says_that_it_is_invented(path: Path) -> None:
    assert says_invented(path.read_text(encoding="utf-8"))


@pytest.mark.parametrize("text", ["target: X", "invented: false", "# invented: true\na: 1", "a: {invented: true}", ""])
def test_a_file_that_does_not_say_so_is_noticed(text: str) -> None:
    assert not says_invented(text)


def test_the_readme_says_that_the_demo_is_invented() -> None:
    assert "invented" in README
