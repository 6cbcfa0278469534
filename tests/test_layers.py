"""The house: which room may import which, and how large things may grow. Every module is read, none is run."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from dataclasses import dataclass
from functools import cache
from pathlib import Path

import pytest

ROOT = Path(__file__).resolve().parent.parent
PACKAGE = ROOT / "symamp"

# Lowest first; a module imports from its own layer and from those before it.
GROUND_FLOOR = (
    "errors",
    "values",
    "formula_tree",
    "formula_algebras",
    "formula_arrays",
    "formula_scan",
    "formula_latex_names",
    "formula_latex",
    "formula",
)
ROOMS = ("circuit", "exact", "assumptions", "span", "judge", "show", "testing")
ROOF = ("results", "api", "cli", "__init__", "__main__")

# What may be brought in inside a function: libraries that cost a tenth of a second and more, and the modules of
# ours that are nothing but a door to one of them.
HEAVY = (
    "sympy",
    "scipy",
    "matplotlib",
    "contourpy",
    "distributed",
    "lcapy",
    "tree_sitter",
    "tree_sitter_toml",
    "latex2mathml",
)
DOORS = ("symamp.exact.sympy_form",)

# Names are brought in by text at the front alone, where start-up time is felt.
BY_TEXT = ("symamp", "symamp.cli", "symamp.testing")

EVALUATORS = ("eval", "exec", "sympify", "parse_expr", "lambdify", "__import__")
LONGEST_FILE = 400
LONGEST_FUNCTION = 60  # lines without the docstring


@dataclass(frozen=True)
class Import:
    """One import: what is imported, where, and whether inside a function or only for type checkers."""

    target: str
    line: int
    inside: bool
    typing_only: bool


@cache
def modules() -> dict[str, Path]:
    """Every module of the package by its dotted name."""
    found = {}
    for path in sorted(PACKAGE.rglob("*.py")):
        parts = path.relative_to(ROOT).with_suffix("").parts
        found[".".join(parts[:-1] if parts[-1] == "__init__" else parts)] = path
    return found


@cache
def tree_of(name: str) -> ast.Module:
    return ast.parse(modules()[name].read_text(encoding="utf-8"))


@cache
def imports_of(name: str) -> tuple[Import, ...]:
    return tuple(_imports(name, tree_of(name), inside=False, typing_only=False))


def _imports(name: str, node: ast.AST, *, inside: bool, typing_only: bool) -> Iterator[Import]:
    for child in ast.iter_child_nodes(node):
        within = inside or isinstance(child, ast.FunctionDef | ast.AsyncFunctionDef | ast.Lambda)
        typing = typing_only or (isinstance(child, ast.If) and "TYPE_CHECKING" in ast.unparse(child.test))
        if isinstance(child, ast.Import):
            for alias in child.names:
                yield Import(alias.name, child.lineno, within, typing)
        elif isinstance(child, ast.ImportFrom):
            base = _base(name, child)
            for alias in child.names:
                full = f"{base}.{alias.name}"
                yield Import(full if full in modules() else base, child.lineno, within, typing)
        else:
            yield from _imports(name, child, inside=within, typing_only=typing)


def _base(name: str, node: ast.ImportFrom) -> str:
    """The module that `from … import` names, relative ones resolved."""
    if not node.level:
        return node.module or ""
    package = name.split(".") if modules()[name].name == "__init__.py" else name.split(".")[:-1]
    package = package[: len(package) - node.level + 1]
    return ".".join([*package, *([node.module] if node.module else [])])


def layer(name: str) -> int:
    """How high a module stands; KeyError for one that has no place in the house."""
    parts = name.split(".")
    first = parts[1] if len(parts) > 1 else "__init__"
    if first in GROUND_FLOOR:
        return 0
    if first in ROOMS:
        return 1 + ROOMS.index(first)
    if first in ROOF:
        return 1 + len(ROOMS)
    raise KeyError(f"{name} has no place in the house")


def test_the_package_is_read_at_all() -> None:
    assert len(modules()) > 50
    assert {m.split(".")[1] for m in modules() if m.count(".") == 2} <= set(ROOMS)


@pytest.mark.parametrize("name", list(modules()))
def test_imports_go_down_the_house(name: str) -> None:
    wrong = [
        f"{name}:{found.line} imports {found.target}"
        for found in imports_of(name)
        if found.target in modules() and layer(found.target) > layer(name)
    ]
    assert not wrong


def test_no_import_cycles() -> None:
    """Imports inside functions count: a ring that is hidden in a function is a ring."""
    edges = {
        name: [i.target for i in imports_of(name) if i.target in modules() and not i.typing_only]
        for name in modules()
    }
    assert _ring(edges) == []


def _ring(edges: dict[str, list[str]]) -> list[str]:
    """The modules of some cycle in order, or an empty list."""
    done: set[str] = set()
    path: list[str] = []

    def visit(name: str) -> list[str]:
        if name in path:
            return [*path[path.index(name) :], name]
        if name in done:
            return []
        path.append(name)
        for target in edges[name]:
            if found := visit(target):
                return found
        path.pop()
        done.add(name)
        return []

    return next((found for name in edges if (found := visit(name))), [])


def test_a_ring_is_found() -> None:
    assert _ring({"a": ["b"], "b": ["c"], "c": ["b"]}) == ["b", "c", "b"]
    assert _ring({"a": ["b", "c"], "b": ["c"], "c": []}) == []


@pytest.mark.parametrize("name", list(modules()))
def test_imports_stand_at_the_top_unless_heavy(name: str) -> None:
    wrong = [
        f"{name}:{found.line} imports {found.target} inside a function"
        for found in imports_of(name)
        if found.inside and found.target.split(".")[0] not in HEAVY and found.target not in DOORS
    ]
    assert not wrong


def test_doors_are_what_they_say() -> None:
    for door in DOORS:
        assert any(found.target.split(".")[0] in HEAVY for found in imports_of(door))


@pytest.mark.parametrize("name", list(modules()))
def test_nothing_is_evaluated(name: str) -> None:
    """No text becomes code, and modules are brought in by text at the front alone."""
    called = [
        (node.func.id if isinstance(node.func, ast.Name) else getattr(node.func, "attr", ""), node.lineno)
        for node in ast.walk(tree_of(name))
        if isinstance(node, ast.Call)
    ]
    wrong = [f"{name}:{line} calls {what}" for what, line in called if what in EVALUATORS]
    wrong += [
        f"{name}:{line} calls {what}"
        for what, line in called
        if what == "import_module" and name not in BY_TEXT
    ]
    assert not wrong


@pytest.mark.parametrize("name", list(modules()))
def test_files_and_functions_stay_small(name: str) -> None:
    length = len(modules()[name].read_text(encoding="utf-8").splitlines())
    wrong = [f"{name}: {length} lines"] if length > LONGEST_FILE else []
    for node in ast.walk(tree_of(name)):
        if isinstance(node, ast.FunctionDef | ast.AsyncFunctionDef):
            lines = _length(node)
            if lines > LONGEST_FUNCTION:
                wrong.append(f"{name}:{node.lineno} {node.name}: {lines} lines")
    assert not wrong


def _length(node: ast.FunctionDef | ast.AsyncFunctionDef) -> int:
    """Lines of a function without its docstring."""
    total = (node.end_lineno or node.lineno) - node.lineno + 1
    first = node.body[0]
    if ast.get_docstring(node) is None:
        return total
    return total - ((first.end_lineno or first.lineno) - first.lineno + 1)


@pytest.mark.parametrize("name", list(modules()))
def test_every_module_says_what_it_is(name: str) -> None:
    assert ast.get_docstring(tree_of(name))
