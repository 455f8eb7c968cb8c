"""The house: rooms stand in one row, and a file imports only from rooms before its own or beside it."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from fnmatch import fnmatch
from pathlib import Path

import networkx as nx
import pytest

ROOT = Path(__file__).resolve().parents[1]
PACKAGE = "hubokit"
ROOMS = (
    "errors",
    "model",
    "spectrum",
    "design",
    "projection",
    "reduction",
    "validation",
    "exchange",
    "devices",
    "readings",
    "preparation",
    "report",
    "cli",
)


def modules_of(top: Path) -> dict[str, Path]:
    """Dotted module name to file, for every Python file below ``top/hubokit``."""
    found = {}
    for path in sorted((top / PACKAGE).rglob("*.py")):
        parts = path.relative_to(top).with_suffix("").parts
        found[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = path
    return found


def typing_only(tree: ast.AST) -> set[ast.AST]:
    """The nodes below ``if TYPE_CHECKING:``, which never run."""
    return {
        inner
        for node in ast.walk(tree)
        if isinstance(node, ast.If) and "TYPE_CHECKING" in ast.unparse(node.test)
        for statement in node.body
        for inner in ast.walk(statement)
    }


def imports_of(name: str, path: Path, known: set[str], typing: bool = True) -> Iterator[tuple[str, int]]:
    """Every module of the package that a file imports, with the line, wherever it stands in the file."""
    package = name if path.name == "__init__.py" else name.rpartition(".")[0]
    tree = ast.parse(path.read_text(encoding="utf-8"))
    left_out = set() if typing else typing_only(tree)
    for node in ast.walk(tree):
        if node in left_out:
            continue
        if isinstance(node, ast.Import):
            for alias in node.names:
                if alias.name.split(".")[0] == PACKAGE:
                    yield alias.name, node.lineno
        elif isinstance(node, ast.ImportFrom):
            base = node.module or ""
            if node.level:
                stem = package.split(".")[: len(package.split(".")) - node.level + 1]
                base = ".".join([*stem, *([node.module] if node.module else [])])
            if base.split(".")[0] == PACKAGE:
                for alias in node.names:
                    inner = f"{base}.{alias.name}"
                    yield (inner if inner in known else base), node.lineno


def room_of(name: str) -> str | None:
    """The room of a module; None for the package itself, which only gathers the public names."""
    parts = name.split(".")
    return parts[1] if len(parts) > 1 else None


def faults(top: Path) -> list[str]:
    """One line for each import that breaks the order of the rooms, and one for each cycle among modules."""
    modules = modules_of(top)
    graph: nx.DiGraph[str] = nx.DiGraph()
    lines = []
    for name, path in modules.items():
        room = room_of(name)
        where = path.relative_to(top).as_posix()
        if room is not None and room not in ROOMS:
            lines.append(f"{where}: {room} is no room of the house")
            continue
        for target, line in imports_of(name, path, set(modules)):
            other = room_of(target)
            if room is None:
                if other == "cli":
                    lines.append(f"{where}:{line}: the public names do not come from cli")
            elif other is None:
                lines.append(f"{where}:{line}: imports the package itself, which stands after every room")
            elif ROOMS.index(other) > ROOMS.index(room):
                lines.append(f"{where}:{line}: {room} imports {other}, a room after its own")
        graph.add_edges_from((name, target) for target, _ in imports_of(name, path, set(modules), typing=False))
    lines += [f"cycle: {' -> '.join(cycle)}" for cycle in nx.simple_cycles(graph)]
    return lines


def test_no_file_imports_from_a_room_after_its_own_and_no_modules_import_each_other() -> None:
    assert faults(ROOT) == []


def test_the_audit_rests_on_nothing_but_the_error_types() -> None:
    modules = modules_of(ROOT)
    audit = {name for name in modules if name.startswith(f"{PACKAGE}.validation.audit")}
    assert f"{PACKAGE}.validation.audit" in audit
    outside = {
        (name, target)
        for name in audit
        for target, _ in imports_of(name, modules[name], set(modules))
        if target not in audit and target != f"{PACKAGE}.errors"
    }
    assert outside == set()


@pytest.mark.parametrize(
    ("files", "fault"),
    [
        ({"model/a.py": "from hubokit.spectrum import b", "spectrum/b.py": ""}, "a room after its own"),
        ({"model/a.py": "def f():\n    import hubokit.cli.b", "cli/b.py": ""}, "a room after its own"),
        (
            {
                "model/a.py": "if TYPE_CHECKING:\n    from ..reduction.b import C",
                "reduction/b.py": "",
            },
            "a room after its own",
        ),
        ({"model/a.py": "from . import b", "model/b.py": "from .a import x"}, "cycle"),
        (
            {
                "model/a.py": "def f():\n    from hubokit.model.b import y",
                "model/b.py": "import hubokit.model.a",
            },
            "cycle",
        ),
        ({"kitchen/a.py": ""}, "no room"),
        ({"model/a.py": "from hubokit import Hamiltonian"}, "package itself"),
        ({"__init__.py": "from hubokit.cli.b import main", "cli/b.py": ""}, "cli"),
    ],
)
def test_a_house_with_a_broken_wall_is_told(tmp_path: Path, files: dict[str, str], fault: str) -> None:
    for name, text in files.items():
        path = tmp_path / PACKAGE / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    assert any(fault in line for line in faults(tmp_path))


def test_a_sound_house_is_left_alone(tmp_path: Path) -> None:
    sound = {
        "errors.py": "",
        "model/__init__.py": "",
        "model/a.py": "from hubokit.errors import E\nfrom .b import x",
        "model/b.py": "import numpy\nif TYPE_CHECKING:\n    from hubokit.model.a import C",
        "cli/c.py": "from ..model import a",
    }
    for name, text in sound.items():
        path = tmp_path / PACKAGE / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8")
    assert faults(tmp_path) == []


def test_the_top_of_the_repository_holds_what_it_should_and_nothing_else() -> None:
    wanted = {
        "README.md",
        "DEVELOPERS.md",
        "LICENSE",
        "pyproject.toml",
        "hubokit",
        "tests",
        "schemas",
        "fixtures",
    }
    passing = [line.rstrip("/") for line in (ROOT / ".gitignore").read_text(encoding="utf-8").split()]
    names = {path.name for path in ROOT.iterdir() if not path.name.startswith(".")}
    assert {name for name in names if not any(fnmatch(name, pattern) for pattern in passing)} == wanted


def test_no_file_of_the_package_is_longer_than_four_hundred_lines() -> None:
    long = {
        path.relative_to(ROOT).as_posix(): lines
        for path in modules_of(ROOT).values()
        if (lines := len(path.read_text(encoding="utf-8").splitlines())) > 400
    }
    assert long == {}
