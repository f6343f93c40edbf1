"""Who may import whom, read from the syntax trees of all modules; every check is shown able to fail.

A module may import its own room and lower floors, wherever the import stands; imports for type checkers alone do
not count. Heavy libraries load inside the function that needs them, only the command line prints, and the recount
reaches neither the solver nor the slots nor the fast sky.
"""

from __future__ import annotations

import ast
from collections.abc import Iterable, Iterator
from pathlib import Path

import pytest

PACKAGE = Path(__file__).resolve().parent.parent / "planner"
FLOORS = (
    ("units", "errors"),
    ("records",),
    ("campaign", "physics"),
    ("sky", "instruments"),
    ("prediction",),
    ("schedule", "learn", "journal"),
    ("report",),
    ("flow",),
    ("cli",),
    ("__main__",),
)
FLOOR_OF = {room: floor for floor, rooms in enumerate(FLOORS) for room in rooms}
HEAVY = {"ortools", "matplotlib", "highspy", "pandas", "scipy", "astropy", "astroplan"}
ROOT_DOOR = "planner.__init__"  # loads the public names on first use, by their text: the one module without a floor


def module_name(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    if len(parts) > 2 and parts[-1] == "__init__":
        parts = parts[:-1]
    return ".".join(parts)


SOURCES = {module_name(path): path.read_text(encoding="utf-8") for path in sorted(PACKAGE.rglob("*.py"))}
PACKAGES = {module_name(path) for path in PACKAGE.rglob("__init__.py")}


# ------------------------------------------------------------------ reading a syntax tree


def counted(tree: ast.AST, *, functions: bool) -> Iterator[ast.AST]:
    """Every node except those that only a type checker sees; with or without the bodies of functions."""
    for node in ast.iter_child_nodes(tree):
        if isinstance(node, ast.If) and ast.unparse(node.test) in ("TYPE_CHECKING", "typing.TYPE_CHECKING"):
            for other in node.orelse:
                yield other
                yield from counted(other, functions=functions)
        elif functions or not isinstance(node, (ast.FunctionDef, ast.AsyncFunctionDef, ast.Lambda)):
            yield node
            yield from counted(node, functions=functions)


def imported(module: str, source: str, *, functions: bool = True) -> set[str]:
    """Full names of all modules (or names in modules) that a module imports.

    ``from planner import flow`` gives ``planner.flow``; relative imports are resolved; an import by a text that
    stands in the call counts, one by a computed text is given as ``?``.
    """
    found: set[str] = set()
    package = module if module in PACKAGES else module.rpartition(".")[0]
    for node in counted(ast.parse(source), functions=functions):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                up = package.split(".")[: len(package.split(".")) - node.level + 1]
                base = ".".join([*up, *([base] if base else [])])
            found |= {f"{base}.{alias.name}" for alias in node.names}
        elif isinstance(node, ast.Call) and ast.unparse(node.func).rpartition(".")[2] in (
            "import_module",
            "__import__",
        ):
            argument = node.args[0] if node.args else None
            text = argument.value if isinstance(argument, ast.Constant) else "?"
            found.add(str(text))
    return found


def room(name: str) -> str:
    """The room of a full name inside the package; the package itself has none."""
    return name.split(".")[1] if name.count(".") else ""


# ------------------------------------------------------------------ the checks


def wrong_imports(module: str, source: str) -> list[str]:
    """Imports that go to a sibling room or upwards, or that cannot be followed."""
    here = room(module)
    if here not in FLOOR_OF:
        return [f"{module}: room {here!r} stands on no floor"]
    found = []
    for name in sorted(imported(module, source)):
        if name == "?":
            found.append(f"{module}: imports a module by a computed name")
        elif name == "planner" or (name.startswith("planner.") and room(name) not in FLOOR_OF):
            found.append(f"{module}: imports {name} through the package's front door")
        elif name.startswith("planner.") and room(name) != here and FLOOR_OF[room(name)] >= FLOOR_OF[here]:
            found.append(f"{module}: imports {name}, which is not on a lower floor")
    return found


def early_heavy_imports(module: str, source: str) -> list[str]:
    """Heavy libraries that load as soon as a module is imported."""
    names = imported(module, source, functions=False)
    return [f"{module}: loads {name}" for name in sorted(names) if name.split(".")[0] in HEAVY]


def printing(module: str, source: str) -> list[str]:
    """Uses of ``print``, of the standard streams, and of the library that draws on terminals.

    Asking whether a stream is there, and flushing it (before a solver's own output is silenced), prints nothing.
    """
    found = [f"{module}: imports {n}" for n in sorted(imported(module, source)) if n.split(".")[0] == "rich"]
    nodes = list(counted(ast.parse(source), functions=True))
    harmless = {id(n.value) for n in nodes if isinstance(n, ast.Attribute) and n.attr == "flush"}
    harmless |= {id(n.left) for n in nodes if isinstance(n, ast.Compare) and isinstance(n.ops[0], (ast.Is, ast.IsNot))}
    for node in nodes:
        if isinstance(node, ast.Name) and node.id == "print":
            found.append(f"{module}:{node.lineno}: print")
        stream = ast.unparse(node) if isinstance(node, ast.Attribute) else ""
        if isinstance(node, ast.Attribute) and stream in ("sys.stdout", "sys.stderr") and id(node) not in harmless:
            found.append(f"{module}:{node.lineno}: {stream}")
    return found


def reached(start: Iterable[str], sources: dict[str, str]) -> set[str]:
    """All modules of the package that importing some of them can lead to, packages on the way included."""
    found: set[str] = set()
    todo = list(start)
    while todo:
        module = todo.pop()
        if module in found or module not in sources:
            continue
        found.add(module)
        for name in imported(module, sources[module]):
            # a name may be a module or something in one; the packages above it run too
            parts = name.split(".")
            todo += [".".join(parts[:i]) for i in range(2, len(parts) + 1)]
    return found


def is_recount(module: str) -> bool:
    return module.startswith("planner.schedule.recount")


def dependent_recount(sources: dict[str, str]) -> list[str]:
    """What the recount reaches although a plan must be judged without it."""
    recounts = [module for module in sources if is_recount(module)]
    inside = reached(recounts, sources)
    found = [
        f"the recount reaches {module}"
        for module in sorted(inside)
        if (room(module) == "schedule" and module != "planner.schedule" and not is_recount(module))
        or room(module) == "sky"
    ]
    for module in sorted(inside):
        names = imported(module, sources[module])
        found += [f"{module} imports {n}" for n in sorted(names) if n.split(".")[0] in ("ortools", "highspy")]
    return found


# ------------------------------------------------------------------ the package keeps them


def test_every_module_is_read() -> None:
    """The other tests would pass on an empty list."""
    assert {"planner.flow", "planner.schedule.recount", "planner.cli.app", "planner.physics"} <= set(SOURCES)
    assert {room(module) for module in SOURCES} - {"__init__"} <= set(FLOOR_OF)


@pytest.mark.parametrize("module", sorted(set(SOURCES) - {ROOT_DOOR}))
def test_a_module_imports_only_its_own_room_and_lower_floors(module: str) -> None:
    assert wrong_imports(module, SOURCES[module]) == []


def test_the_front_door_imports_nothing_of_the_package_until_a_name_is_asked_for() -> None:
    names = imported(ROOT_DOOR, SOURCES[ROOT_DOOR], functions=False)
    assert [name for name in names if name.split(".")[0] == "planner"] == []


@pytest.mark.parametrize("module", sorted(SOURCES))
def test_no_module_loads_a_heavy_library_on_import(module: str) -> None:
    assert early_heavy_imports(module, SOURCES[module]) == []


# The last module only tells the standard streams how to show letters that a terminal lacks.
@pytest.mark.parametrize("module", sorted(m for m in SOURCES if room(m) not in ("cli", "__main__")))
def test_only_the_command_line_prints(module: str) -> None:
    assert printing(module, SOURCES[module]) == []


def test_the_command_line_is_seen_to_print() -> None:
    assert any(printing(module, source) for module, source in SOURCES.items() if room(module) == "cli")


def test_the_recount_reaches_neither_solver_nor_slots_nor_the_fast_sky() -> None:
    """Also by way of other modules: the recount of a plan shares no code with what made it."""
    assert any(is_recount(module) for module in SOURCES)
    assert dependent_recount(SOURCES) == []


# ------------------------------------------------------------------ every check can fail


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("planner.physics.bad", "from planner.campaign.records import Campaign"),  # sibling
        ("planner.campaign.bad", "import planner.physics.echo"),  # sibling, the other way
        ("planner.sky.bad", "from planner.instruments import camera"),  # sibling
        ("planner.errors", "from planner.units import DAY_S"),  # sibling
        ("planner.units", "from planner.records import Plan"),  # upwards
        ("planner.physics.bad", "def f():\n    from planner.sky import clock"),  # upwards, inside a function
        ("planner.prediction.bad", "from ..schedule.slots import SlotBook"),  # upwards, relative
        ("planner.schedule.bad", "from planner import flow"),  # upwards, by way of the package
        ("planner.report.bad", "from planner import plan"),  # a public name lives upstairs
        ("planner.report.bad", "import planner"),
        ("planner.report.bad", "import importlib\nimportlib.import_module('planner.cli')"),
        ("planner.report.bad", "from importlib import import_module\nimport_module('planner.' + 'cli')"),
        ("planner.flow", "class A:\n    def f(self):\n        async def g():\n            import planner.cli.app"),
        ("planner.sky.bad", "if TYPE_CHECKING:\n    pass\nelse:\n    from planner.flow import plan"),
        ("planner.attic.bad", "import math"),  # a room without a floor
    ],
)
def test_a_wrong_import_is_found(module: str, source: str) -> None:
    assert len(wrong_imports(module, source)) == 1


@pytest.mark.parametrize(
    ("module", "source"),
    [
        ("planner.sky.good", "from planner.physics.echo import sheet_ring\nfrom planner.sky.clock import x"),
        ("planner.sky.good", "from . import clock\nfrom ..units import DAY_S\nimport numpy as np"),
        ("planner.sky.good", "if TYPE_CHECKING:\n    from planner.flow import Results"),
        ("planner.cli.good", "def f():\n    from planner import flow"),
    ],
)
def test_a_right_import_is_left_alone(module: str, source: str) -> None:
    assert wrong_imports(module, source) == []


@pytest.mark.parametrize("library", sorted(HEAVY))
@pytest.mark.parametrize(
    "frame",
    [
        "import {}",
        "import {}.x as y",
        "from {}.x import y",
        "class A:\n    import {}",
        "try:\n    import {}\nexcept ImportError:\n    pass",
    ],
)
def test_an_early_heavy_import_is_found(library: str, frame: str) -> None:
    source = frame.format(library)
    assert len(early_heavy_imports("planner.sky.bad", source)) == 1
    late = "def f():\n" + "\n".join("    " + line for line in source.splitlines())
    assert early_heavy_imports("planner.sky.good", late) == []
    assert early_heavy_imports("planner.sky.good", f"if TYPE_CHECKING:\n    import {library}") == []


@pytest.mark.parametrize(
    "source",
    [
        "def f():\n    print('x')",
        "list(map(print, 'ab'))",
        "import sys\nsys.stdout.write('x')",
        "import sys\ndef f(to=sys.stderr): ...",
        "import sys\nif sys.stdout is not None:\n    sys.stdout.flush()\n    sys.stdout.buffer.write(b'x')",
        "def f():\n    from rich.console import Console",
    ],
)
def test_printing_is_found(source: str) -> None:
    assert len(printing("planner.report.bad", source)) == 1


def test_text_about_printing_is_no_printing() -> None:
    assert printing("planner.report.good", '"""This does not print(anything)."""\nblueprint = 1') == []


@pytest.mark.parametrize(
    "line",
    [
        "from planner.schedule.slots import SlotBook",
        "from planner.schedule import solve",
        "def f():\n    from planner.schedule.highs import x",
        "from planner.sky.directions import altitude_deg",
        "from planner.sky import clock",
        "def f():\n    import highspy",
        "from ortools.sat.python import cp_model",
        "from planner.prediction.tracks import track_of",  # it leads on to the sky
    ],
)
def test_a_dependent_recount_is_found(line: str) -> None:
    assert dependent_recount(SOURCES | {"planner.schedule.recount_bad": line})
