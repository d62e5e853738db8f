"""Dependencies point one way: cli > watch > book > report > history > findings > geometry, intake > ground floor."""

import ast
import importlib.util
import re
from pathlib import Path

import pytest

PACKAGE = Path(__file__).parent.parent / "generator"

#: Rooms and modules from the ground floor up; each may import only from lower steps, or from itself.
STEPS = (
    {"problems", "numbers"},
    {"disk"},
    {"lock", "identity"},
    {"geometry", "intake"},
    {"findings"},
    {"history"},
    {"report"},
    {"folders"},
    {"tasks", "job", "shared"},
    {"chapter"},
    {"workers", "status"},
    {"run"},
    {"book"},
    {"packing"},
    {"settling", "hints"},
    {"watch"},
    {"cli"},
    {"__main__"},
)
STEP_OF = {room: step for step, rooms in enumerate(STEPS) for room in rooms}
MODULES = sorted(path for path in PACKAGE.rglob("*.py") if path != PACKAGE / "__init__.py")

#: Who alone may import a library, by path beginnings below the package.
ONLY = {
    "matplotlib": ("report/figures",),
    "jinja2": ("report/themes", "report/pages"),
    "markupsafe": ("report/",),
    "markdown": ("report/notes",),
    "watchdog": ("hints",),
    "scipy": ("geometry/", "findings/"),
}


def name_of(path: Path) -> str:
    parts = path.relative_to(PACKAGE.parent).with_suffix("").parts
    return ".".join(parts[:-1] if parts[-1] == "__init__" else parts)


def room_of(module: str) -> str:
    """The room or ground-floor module of a dotted name below the package."""
    return module.split(".")[1]


def imports_of(path: Path, *, at_import: bool = False) -> set[str]:
    """Dotted names that a module imports; ``at_import`` leaves out those inside functions."""
    tree = ast.parse(path.read_text(encoding="utf-8"))
    found: set[str] = set()
    pending: list[ast.AST] = [tree]
    while pending:
        node = pending.pop()
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, f"{path.name} imports relatively"
            found |= {_target(node.module or "", alias.name) for alias in node.names}
        is_function = isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef)
        is_for_types = isinstance(node, ast.If) and ast.unparse(node.test) == "TYPE_CHECKING"
        if not (at_import and (is_function or is_for_types)):
            pending += ast.iter_child_nodes(node)
    return found


def _target(module: str, name: str) -> str:
    """``from generator.report import words`` imports the module, ``from …words import X`` a name of it."""
    if not module.startswith("generator"):
        return module
    below = PACKAGE.parent.joinpath(*module.split("."), name)
    return f"{module}.{name}" if below.with_suffix(".py").exists() or below.is_dir() else module


def own_imports(path: Path, *, at_import: bool = False) -> set[str]:
    return {name for name in imports_of(path, at_import=at_import) if name.startswith("generator.")}


@pytest.mark.parametrize("path", MODULES, ids=name_of)
def test_imports_point_down(path: Path) -> None:
    """A module imports from its own room and from rooms below it."""
    room = room_of(name_of(path))
    assert room in STEP_OF, f"say in STEPS where {room} stands"
    upward = {name for name in own_imports(path) if room_of(name) != room and STEP_OF[room_of(name)] >= STEP_OF[room]}
    assert upward == set()


@pytest.mark.parametrize("path", MODULES, ids=name_of)
def test_geometry_and_intake_stand_alone(path: Path) -> None:
    """Geometry imports nothing of the project, intake only what problems are and how numbers look."""
    room = room_of(name_of(path))
    allowed = {"geometry": {"geometry"}, "intake": {"intake", "problems", "numbers"}}.get(room)
    if allowed is not None:
        assert {room_of(name) for name in own_imports(path)} <= allowed


@pytest.mark.parametrize("path", MODULES, ids=name_of)
def test_libraries_stay_in_their_rooms(path: Path) -> None:
    """Each library is imported by the modules that are there for it."""
    place = path.relative_to(PACKAGE).as_posix()
    libraries = {name.split(".")[0] for name in imports_of(path)}
    strangers = {name for name, places in ONLY.items() if name in libraries and not place.startswith(places)}
    assert strangers == set()


@pytest.mark.parametrize("path", MODULES, ids=name_of)
def test_nothing_imports_the_door(path: Path) -> None:
    """No module but ``__main__`` imports the command line."""
    if path.name != "__main__.py":
        assert "generator.cli" not in own_imports(path)


def test_there_is_no_cycle() -> None:
    """No module, directly or through others, imports itself."""
    graph = {name_of(path): own_imports(path, at_import=True) for path in MODULES}
    done: set[str] = set()

    def visit(module: str, trail: tuple[str, ...]) -> None:
        assert module not in trail, " > ".join((*trail, module))
        if module not in done:
            for name in sorted(graph.get(module, ())):
                visit(name, (*trail, module))
            done.add(module)

    for module in sorted(graph):
        visit(module, ())
    assert done >= set(graph)


def test_only_the_door_asks_the_clock() -> None:
    """The moment is an argument everywhere; only ``cli`` asks what time it is."""
    asking = [
        name_of(path)
        for path in MODULES
        if any(call in path.read_text(encoding="utf-8") for call in ("datetime.now(", "date.today(", "time.time("))
    ]
    assert asking == ["generator.cli"]


def test_the_guide_has_every_room() -> None:
    """The table of rooms in DEVELOPERS.md names every room and module of the top, and nothing that is not there."""
    table = (PACKAGE.parent / "DEVELOPERS.md").read_text(encoding="utf-8").split("## The rooms", 1)[1]
    rows = [line.split("|")[1] for line in table.split("\n## ", 1)[0].splitlines() if line.startswith("| `")]
    named = {name.strip("/").removesuffix(".py") for row in rows for name in re.findall("`([^`]+)`", row)}
    assert named == set(STEP_OF) - {"__main__"}


def test_every_step_is_there() -> None:
    """The list of rooms in this file names only what exists."""
    assert [room for room in STEP_OF if importlib.util.find_spec(f"generator.{room}") is None] == []
