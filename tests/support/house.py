"""House rules as functions of source text: each gives what breaks the rule, with its line.

The tests in `house/` run them over the tree, and over planted breaches to show that they find them.
"""

from __future__ import annotations

import ast
import sys
from collections.abc import Iterator
from pathlib import Path

ROOT = Path(__file__).parents[2]
SERVICE = ROOT / "service"

# The clock, chance and new ids: everything that makes the same call give different answers.
IMPURE = {
    "datetime.date.today",
    "datetime.datetime.now",
    "datetime.datetime.today",
    "datetime.datetime.utcnow",
    "os.urandom",
    "sqlalchemy.func.current_timestamp",
    "sqlalchemy.func.now",
    "time.gmtime",
    "time.localtime",
    "time.time",
    "time.time_ns",
}
IMPURE_MODULES = ("numpy.random.", "random.", "secrets.", "uuid6.", "uuid.uuid")
# Types, and generators that are given their seed.
PURE = {
    "numpy.random.default_rng",
    "numpy.random.Generator",
    "random.Random",
    "secrets.compare_digest",
    "uuid6.UUID",
}

PREFIXED_UNITS = {"mOhm", "kOhm", "MOhm", "mV", "kV", "mA", "kHz"}

Function = ast.FunctionDef | ast.AsyncFunctionDef


def modules(*folders: Path) -> list[Path]:
    """Every Python module under these folders, in a stable order."""
    return sorted(path for folder in folders for path in folder.rglob("*.py"))


def impure_references(source: str) -> Iterator[str]:
    """Uses of the clock, of chance and of new ids; a mention counts, since it may be passed on."""
    tree = ast.parse(source)
    known = _imported_names(tree)
    for node in ast.walk(tree):
        if isinstance(node, ast.Name | ast.Attribute):
            name = _full_name(node, known)
            if name in IMPURE or (name.startswith(IMPURE_MODULES) and name not in PURE):
                yield f"{node.lineno}: {name}"
        if isinstance(node, ast.Call) and not node.args and not node.keywords:
            name = _full_name(node.func, known)
            if name in {"numpy.random.default_rng", "random.Random"}:
                yield f"{node.lineno}: {name} without a seed"


def foreign_imports(source: str, allowed: set[str]) -> Iterator[str]:
    """Imports from outside the standard library and the modules allowed, with what lies below them."""
    for line, name in _imports(source):
        if not any(f"{name}.".startswith(f"{module}.") for module in allowed):
            yield f"{line}: {name}"


def imported_packages(source: str) -> set[str]:
    """The top-level packages that a module imports, the standard library's left out."""
    return {name.split(".")[0] for _, name in _imports(source)}


def _imports(source: str) -> Iterator[tuple[int, str]]:
    for node in ast.walk(ast.parse(source)):
        names: list[str] = []
        if isinstance(node, ast.Import):
            names = [alias.name for alias in node.names]
        elif isinstance(node, ast.ImportFrom):
            names = [f"{node.module}.{alias.name}" for alias in node.names]
        yield from (
            (node.lineno, name) for name in names if name.split(".")[0] not in sys.stdlib_module_names
        )


def generator_functions(source: str) -> set[str]:
    """Names of the functions whose own body yields."""
    return {
        function.name
        for function in ast.walk(ast.parse(source))
        if isinstance(function, Function)
        and any(isinstance(node, ast.Yield | ast.YieldFrom) for node in _own_nodes(function))
    }


def dependencies(source: str) -> set[str]:
    """Names of the functions that this module hands to FastAPI as dependencies."""
    found = set()
    for node in ast.walk(ast.parse(source)):
        if isinstance(node, ast.Call) and _last_name(node.func) in {"Depends", "Security"}:
            handed = [*node.args[:1], *(word.value for word in node.keywords if word.arg == "dependency")]
            found |= {_last_name(argument) for argument in handed}
    return found


def docstring_lines(source: str) -> int:
    """Lines with text in the module's docstring; 0 where there is none."""
    text = ast.get_docstring(ast.parse(source)) or ""
    return sum(1 for line in text.splitlines() if line.strip())


def function_lengths(source: str) -> Iterator[tuple[str, int]]:
    """Each function's name and its lines without the docstring."""
    for function in ast.walk(ast.parse(source)):
        if isinstance(function, Function):
            text = ast.get_docstring(function, clean=False)
            documented = len(text.splitlines()) if text else 0
            yield function.name, (function.end_lineno or 0) - function.lineno + 1 - documented


def prefixed_units(source: str) -> Iterator[str]:
    """Prefixed unit codes written out as strings, but for a reading's own `"unit"` in an example."""
    tree = ast.parse(source)
    given = {
        id(value)
        for node in ast.walk(tree)
        if isinstance(node, ast.Dict)
        for key, value in zip(node.keys, node.values, strict=True)
        if isinstance(key, ast.Constant) and key.value == "unit"
    }
    for node in ast.walk(tree):
        if isinstance(node, ast.Constant) and node.value in PREFIXED_UNITS and id(node) not in given:
            yield f"{node.lineno}: {node.value}"


def _imported_names(tree: ast.Module) -> dict[str, str]:
    known = {}
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            for alias in node.names:
                shown = alias.asname or alias.name.split(".")[0]
                known[shown] = alias.name if alias.asname else shown
        elif isinstance(node, ast.ImportFrom):
            known |= {alias.asname or alias.name: f"{node.module}.{alias.name}" for alias in node.names}
    return known


def _full_name(node: ast.expr, known: dict[str, str]) -> str:
    """The dotted name behind this expression, by the module's imports; empty for anything else."""
    if isinstance(node, ast.Name):
        return known.get(node.id, "")
    if isinstance(node, ast.Attribute) and (owner := _full_name(node.value, known)):
        return f"{owner}.{node.attr}"
    return ""


def _last_name(node: ast.expr) -> str:
    return node.attr if isinstance(node, ast.Attribute) else node.id if isinstance(node, ast.Name) else ""


def _own_nodes(function: Function) -> Iterator[ast.AST]:
    """The nodes of a function without those of the functions inside it."""
    waiting: list[ast.AST] = list(function.body)
    while waiting:
        node = waiting.pop()
        if isinstance(node, Function | ast.Lambda):
            continue
        yield node
        waiting.extend(ast.iter_child_nodes(node))
