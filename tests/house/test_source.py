"""House rules over the source, each shown to find a planted breach."""

from __future__ import annotations

from pathlib import Path

import pytest

from support import house

MODULES = house.modules(house.SERVICE)
API = house.modules(house.SERVICE / "api")


def shown(path: Path) -> str:
    return str(path.relative_to(house.ROOT))


def breaches(path: Path, found: object) -> list[str]:
    return [f"{shown(path)}:{breach}" for breach in found]  # type: ignore[attr-defined]


@pytest.mark.parametrize("path", MODULES, ids=shown)
def test_time_ids_and_chance_are_arguments(path: Path) -> None:
    if path not in {house.SERVICE / "app.py", house.SERVICE / "cli.py"}:
        assert breaches(path, house.impure_references(path.read_text())) == []


@pytest.mark.parametrize(
    "planted",
    [
        "from datetime import datetime\ndatetime.now()",
        "import datetime as dt\nmade = dt.date.today",
        "import time\ntime.time()",
        "from uuid6 import uuid7\nuuid7()",
        "import uuid\nuuid.uuid4()",
        "import secrets\nsecrets.token_urlsafe()",
        "import numpy as np\nnp.random.normal()",
        "import numpy as np\nnp.random.default_rng()",
        "from sqlalchemy import func\nfunc.now()",
    ],
)
def test_a_hidden_clock_or_die_is_found(planted: str) -> None:
    assert len(list(house.impure_references(planted))) == 1


def test_a_clock_that_is_given_is_no_breach() -> None:
    given = "import numpy as np\ndef f(clock, seed):\n    clock.now()\n    np.random.default_rng(seed)"
    assert list(house.impure_references(given)) == []


def test_no_dependency_yields() -> None:
    """A lock or a connection held in a dependency deadlocks the thread pool, or outlives the answer."""
    handed = set().union(*(house.dependencies(path.read_text()) for path in [*API, *MODULES]))
    for path in API:
        assert not house.generator_functions(path.read_text()) & handed, shown(path)


def test_a_dependency_that_yields_is_found() -> None:
    planted = "def tx():\n    yield 1\ndef lines():\n    yield 2\ndef get(t=Depends(deps.tx)): ..."
    assert house.generator_functions(planted) == {"tx", "lines"}
    assert house.dependencies(planted) == {"tx"}
    assert house.dependencies("Annotated[int, Security(dependency=tx)]") == {"tx"}


@pytest.mark.parametrize("path", MODULES, ids=shown)
def test_modules_say_what_belongs_in_them(path: Path) -> None:
    least = 1 if path.name == "__init__.py" else 2
    lines = house.docstring_lines(path.read_text())
    assert least <= lines <= 6


def test_docstring_lines_are_counted_without_blanks() -> None:
    assert house.docstring_lines('"""One.\n\nTwo.\n"""') == 2
    assert house.docstring_lines("x = 1") == 0


@pytest.mark.parametrize("path", MODULES, ids=shown)
def test_modules_and_functions_stay_small(path: Path) -> None:
    source = path.read_text()
    length = len(source.splitlines())
    assert length <= 350
    assert [(name, lines) for name, lines in house.function_lengths(source) if lines > 60] == []


def test_function_lengths_leave_the_docstring_out() -> None:
    assert dict(house.function_lengths('def f():\n    """One.\n\n    Two."""\n    return 1')) == {"f": 2}


PURE_LAYERS = {
    "rules": {"dateutil", "service.rules", "service.errors"},
    "electrical": {"numpy", "scipy", "service.electrical", "service.errors"},
}


@pytest.mark.parametrize("layer", PURE_LAYERS)
def test_pure_layers_import_only_what_the_design_allows(layer: str) -> None:
    for path in house.modules(house.SERVICE / layer):
        assert breaches(path, house.foreign_imports(path.read_text(), PURE_LAYERS[layer])) == []


def test_a_foreign_import_is_found() -> None:
    planted = "import math\nimport service.records\nfrom service import errors\nfrom sqlalchemy import select"
    found = list(house.foreign_imports(planted, {"service.errors"}))
    assert found == ["2: service.records", "4: sqlalchemy.select"]


@pytest.mark.parametrize("path", MODULES, ids=shown)
def test_units_are_converted_in_one_place(path: Path) -> None:
    """The demo writes readings as a client would, in the units that clients use."""
    if path != house.SERVICE / "rules" / "quantities.py" and house.SERVICE / "demo" not in path.parents:
        assert breaches(path, house.prefixed_units(path.read_text())) == []


def test_a_unit_code_outside_its_place_is_found() -> None:
    assert list(house.prefixed_units('FACTORS = {"mOhm": 0.001}')) == ["1: mOhm"]
    assert list(house.prefixed_units('reading = {"value": 310, "unit": "mV"}')) == []
