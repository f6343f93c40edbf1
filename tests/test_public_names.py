"""The public names: what is promised is there, loads late, and is the same object however it is reached."""

from __future__ import annotations

import json
import subprocess
import sys
import tomllib
from pathlib import Path
from typing import Any

import pytest

import planner

ROOT = Path(__file__).resolve().parent.parent
MOST_NAMES = 12  # about a dozen; more would be a second way in to everything

# Imports every submodule, each name twice before, twice after, and tells what came back.
ALL_SUBMODULES = """
import importlib, json, pkgutil, types
import planner
names = [name for name in planner.__all__ if name != "__version__"]  # that one is a text, tested below
first = {name: getattr(planner, name) for name in names} if BEFORE else {}
for found in pkgutil.walk_packages(planner.__path__, "planner."):
    importlib.import_module(found.name)
pairs = {name: (getattr(planner, name), getattr(planner, name)) for name in names}
helpers = {"annotations", "Any", "import_module"}  # what the front door itself imports
there = {
    name for name, value in vars(planner).items()
    if not name.startswith("_") and not isinstance(value, types.ModuleType) and name not in helpers
}
print(json.dumps({
    "same": {name: one is two and first.get(name, one) is one for name, (one, two) in pairs.items()},
    "home": {name: getattr(one, "__module__", None) for name, (one, two) in pairs.items()},
    "kind": {name: type(one).__name__ for name, (one, two) in pairs.items()},
    "there": sorted(there),
    "submodules": sorted(name for name in __import__("sys").modules if name.startswith("planner.")),
}))
"""


def fresh(code: str) -> str:
    """Standard output of a new interpreter that runs ``code`` from the root of the source tree."""
    done = subprocess.run([sys.executable, "-c", code], cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    return done.stdout


@pytest.fixture(scope="module", params=[False, True], ids=["submodules first", "names first"])
def told(request: pytest.FixtureRequest) -> dict[str, Any]:
    """What a fresh interpreter says about the names, reached after or before all submodules are imported."""
    answer: dict[str, Any] = json.loads(fresh(f"BEFORE = {request.param}\n{ALL_SUBMODULES}"))
    return answer


def test_the_list_of_public_names_is_what_is_there(told: dict[str, Any]) -> None:
    """Both ways: nothing promised is missing, nothing public stands unlisted in the package."""
    assert len(set(planner.__all__)) == len(planner.__all__) <= MOST_NAMES
    assert set(told["there"]) | {"__version__"} == set(planner.__all__)
    assert dir(planner) == sorted(planner.__all__)


def test_every_lazy_name_is_listed() -> None:
    """A name that loads but is not listed would be public by accident."""
    assert set(planner._HOMES) | {"__version__"} == set(planner.__all__)


def test_a_public_name_is_one_object_however_often_it_is_asked_for(told: dict[str, Any]) -> None:
    assert told["same"] == dict.fromkeys(planner._HOMES, True)


def test_public_names_come_from_their_homes(told: dict[str, Any]) -> None:
    wrong = {n: told["home"][n] for n, home in planner._HOMES.items() if told["home"][n] != home}
    assert wrong == {}


def test_no_submodule_takes_the_place_of_a_public_function(told: dict[str, Any]) -> None:
    """A subpackage called like a function would overwrite it as soon as it is imported."""
    assert {"planner.flow", "planner.prediction.curves", "planner.cli.plan"} <= set(told["submodules"])
    for name in ("forecast", "windows", "plan", "read_campaign"):
        assert told["kind"][name] == "function"


def test_forecast_stays_a_function_when_flow_is_imported_first() -> None:
    """Commands import it this way round."""
    code = (
        "import planner.flow, planner.cli, planner; print(type(planner.forecast).__name__, planner.forecast.__module__)"
    )
    assert fresh(code).split() == ["function", "planner.flow"]


def test_importing_the_package_loads_no_heavy_library() -> None:
    code = "import planner, sys; print(' '.join(sorted({name.split('.')[0] for name in sys.modules})))"
    loaded = set(fresh(code).split())
    assert "planner" in loaded
    heavy = {"numpy", "astropy", "pandas", "scipy", "matplotlib", "pydantic", "ortools", "highspy", "typer", "rich"}
    assert loaded & heavy == set()


def test_importing_the_package_runs_no_other_module_of_it() -> None:
    code = "import planner, sys; print(' '.join(name for name in sys.modules if name.startswith('planner')))"
    assert fresh(code).split() == ["planner"]


def test_an_unknown_name_is_an_attribute_error_that_repeats_it() -> None:
    with pytest.raises(AttributeError, match="module 'planner' has no attribute 'forecasts'"):
        _ = planner.forecasts


def test_the_version_is_the_one_in_the_project_file() -> None:
    from importlib.metadata import PackageNotFoundError, version

    try:
        version("lightlag")
    except PackageNotFoundError:
        pytest.skip("run from a source tree that is not installed")
    written = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))["project"]["version"]
    assert planner.__version__ == written
