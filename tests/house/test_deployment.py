"""The pins and the container files: no engine runs here, so what can be read of them is checked."""

from __future__ import annotations

import re
import subprocess
import sys
import tomllib
from importlib.metadata import packages_distributions
from pathlib import Path
from typing import Any

import pytest
import yaml
from packaging.requirements import Requirement
from packaging.utils import canonicalize_name

from support import house
from support.house import ROOT

CONSTRAINTS = (ROOT / "docker" / "constraints.txt").read_text().splitlines()
COMPOSE: dict[str, Any] = yaml.safe_load((ROOT / "docker" / "compose.yaml").read_text())
DOCKERFILE = (ROOT / "docker" / "Dockerfile").read_text()
COMMANDS = {
    *re.findall(r'"shuntbook", "([a-z-]+)"', DOCKERFILE),
    *(service["command"][1] for service in COMPOSE["services"].values() if "command" in service),
}


def test_every_dependency_is_pinned_and_no_pin_names_a_place() -> None:
    assert [line for line in CONSTRAINTS if "/" in line or "@" in line or line.startswith("-")] == []
    pinned = {canonicalize_name(Requirement(line).name) for line in CONSTRAINTS}
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    asked = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    assert {canonicalize_name(Requirement(line).name) for line in asked} - pinned == set()


def test_pins_satisfy_what_the_project_asks_for() -> None:
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    asked = {
        canonicalize_name(requirement.name): requirement.specifier
        for requirement in map(
            Requirement, [*project["dependencies"], *project["optional-dependencies"]["test"]]
        )
    }
    for line in CONSTRAINTS:
        pin = Requirement(line)
        version = str(pin.specifier).removeprefix("==")
        assert asked.get(canonicalize_name(pin.name), pin.specifier).contains(version), line


def test_the_service_imports_only_what_it_declares() -> None:
    """What only the test extra brings would be missing where the service runs."""
    project = tomllib.loads((ROOT / "pyproject.toml").read_text())["project"]
    declared = {canonicalize_name(Requirement(line).name) for line in project["dependencies"]}
    declared |= {"anyio", "pydantic-core", "starlette"}  # the ground of FastAPI and Pydantic
    brought_by = packages_distributions()
    for path in house.modules(house.SERVICE, ROOT / "alembic"):
        for package in house.imported_packages(path.read_text()) - {"service"}:
            assert {canonicalize_name(name) for name in brought_by.get(package, [])} & declared, (
                path,
                package,
            )


def test_the_image_runs_as_an_ordinary_user() -> None:
    final = DOCKERFILE.split("\nFROM ")[-1]
    assert re.findall(r"^USER (.+)$", final, re.MULTILINE) == ["shuntbook"]


def test_the_compose_file_holds_no_secret() -> None:
    for service in COMPOSE["services"].values():
        for name, value in service.get("environment", {}).items():
            if "PASSWORD" in name or "@" in value:
                assert "${POSTGRES_PASSWORD:?" in value, name


@pytest.mark.parametrize("command", sorted(COMMANDS))
def test_containers_run_commands_that_exist(command: str) -> None:
    script = Path(sys.executable).parent / "shuntbook"
    answer = subprocess.run([script, command, "--help"], capture_output=True, text=True, check=False)
    assert answer.returncode == 0, answer.stderr
