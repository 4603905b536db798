"""Imports point one way, and pure rooms stay pure. Read from the code, not run."""

import ast
from collections.abc import Iterator
from pathlib import Path

import pytest
from repository import FOLDERS, ROOT, python_files

POSIX_ONLY = frozenset({"pty", "termios", "fcntl"})
NOT_IN_ANALYSIS = frozenset({"time", "socket", "serial", "subprocess", "os"})
CLOCK_READINGS = frozenset({"now", "utcnow", "today"})
FILE_CALLS = frozenset({"imread", "imwrite", "imreadmulti", "urlopen"})

# The twin computes its rays in its own way: the model that it checks is not its to use.
MODEL_CODE = ("pitchsweep.analysis",)

FILES = python_files()


def _name(path: Path) -> str:
    return str(path.relative_to(ROOT))


def _tree(path: Path) -> ast.Module:
    return ast.parse(path.read_text(encoding="utf-8"), filename=str(path))


def _imports(node: ast.AST, package: str) -> Iterator[str]:
    """Absolute names of what ``node`` imports, if it is an import."""
    if isinstance(node, ast.Import):
        yield from (alias.name for alias in node.names)
    elif isinstance(node, ast.ImportFrom):
        base = node.module or ""
        if node.level:
            above = package.split(".")[: len(package.split(".")) - node.level + 1]
            base = ".".join([*above, *filter(None, [node.module])])
        yield base
        yield from (f"{base}.{alias.name}" for alias in node.names)


def _package(path: Path) -> str:
    return ".".join(["pitchsweep", *path.relative_to(ROOT).parent.parts])


def _all_imports(path: Path) -> set[str]:
    package = _package(path)
    return {n for node in ast.walk(_tree(path)) for n in _imports(node, package)}


def _outside_functions(node: ast.AST) -> Iterator[ast.AST]:
    """Nodes that run when the module is imported."""
    for child in ast.iter_child_nodes(node):
        if not isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda):
            yield child
            yield from _outside_functions(child)


def test_there_is_code_in_every_folder() -> None:
    assert {path.relative_to(ROOT).parts[0] for path in FILES} == set(FOLDERS)


@pytest.mark.parametrize("path", FILES, ids=_name)
def test_imports_point_one_way(path: Path) -> None:
    own = FOLDERS.index(path.relative_to(ROOT).parts[0])
    for name in _all_imports(path):
        parts = name.split(".")
        assert parts[0] not in FOLDERS, (
            f"bare import of {name}: write pitchsweep.{name}"
        )
        if parts[0] == "pitchsweep" and len(parts) > 1:
            assert parts[1] in FOLDERS[: own + 1], f"{_name(path)} may not see {name}"


@pytest.mark.parametrize("path", FILES, ids=_name)
def test_nothing_needs_a_posix_terminal_to_be_imported(path: Path) -> None:
    names = {
        name.split(".")[0]
        for node in _outside_functions(_tree(path))
        for name in _imports(node, _package(path))
    }
    assert not names & POSIX_ONLY


@pytest.mark.parametrize("path", sorted((ROOT / "tests").rglob("*.py")), ids=_name)
def test_tests_import_the_packages_by_their_full_name(path: Path) -> None:
    roots = {name.split(".")[0] for name in _all_imports(path)}
    assert not roots & set(FOLDERS)


TWIN = [p for p in FILES if p.is_relative_to(ROOT / "drivers" / "twin")]


@pytest.mark.parametrize("path", TWIN, ids=_name)
def test_the_twin_does_not_use_the_model_it_checks(path: Path) -> None:
    for name in _all_imports(path):
        assert not any(name == m or name.startswith(f"{m}.") for m in MODEL_CODE)


ANALYSIS = [p for p in FILES if p.is_relative_to(ROOT / "analysis")]


@pytest.mark.parametrize("path", ANALYSIS, ids=_name)
def test_analysis_opens_no_port_clock_or_file(path: Path) -> None:
    roots = {name.split(".")[0] for name in _all_imports(path)}
    assert not roots & NOT_IN_ANALYSIS
    for node in ast.walk(_tree(path)):
        if isinstance(node, ast.Call):
            called = node.func
            if isinstance(called, ast.Name):
                assert called.id not in {"open", "print", "input"}
            if isinstance(called, ast.Attribute):
                assert called.attr not in CLOCK_READINGS | FILE_CALLS


@pytest.mark.parametrize(
    ("text", "names"),
    [
        ("import a.b", {"a.b"}),
        ("from a import b", {"a", "a.b"}),
        ("from . import b", {"pitchsweep.safety", "pitchsweep.safety.b"}),
        ("from ..acquire import cli", {"pitchsweep.acquire", "pitchsweep.acquire.cli"}),
        ("def f():\n    import time", {"time"}),
    ],
)
def test_the_reading_of_imports_itself(text: str, names: set[str]) -> None:
    tree = ast.parse(text)
    found = {n for node in ast.walk(tree) for n in _imports(node, "pitchsweep.safety")}
    assert found == names
