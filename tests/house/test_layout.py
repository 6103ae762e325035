"""What may lie where in the tree, and what its text must not name."""

from __future__ import annotations

import re
import subprocess
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
TOP_LEVEL = {
    "README.md",
    "DEVELOPERS.md",
    "pyproject.toml",
    "service",
    "alembic",
    "tests",
    "openapi",
    "docker",
}


def tracked_files() -> list[Path]:
    """Every file git tracks or would track, so that a new file is judged before it is committed."""
    listed = subprocess.run(
        ["git", "ls-files", "-z", "--cached", "--others", "--exclude-standard"],
        cwd=ROOT,
        capture_output=True,
        text=True,
        check=True,
    )
    return [ROOT / name for name in listed.stdout.split("\0") if name and (ROOT / name).is_file()]


def test_top_level_holds_only_what_the_design_names() -> None:
    names = {path.relative_to(ROOT).parts[0] for path in tracked_files()}
    assert {name for name in names if not name.startswith(".")} <= TOP_LEVEL


def test_the_migrations_folder_does_not_shadow_the_installed_package() -> None:
    assert not (ROOT / "alembic" / "__init__.py").exists()


def test_no_lock_file_that_names_hosts() -> None:
    assert not {path.name for path in tracked_files()} & {"uv.lock", "pylock.toml"}


# Written so that these patterns do not match their own source.
FORBIDDEN = {
    "a package index": r"index-ur[l]|find-link[s]|trusted-hos[t]|(pypi|pythonhosted|npmjs)\.(or[g]|co[m])",
    "a path of one machine": r"(^|[^A-Za-z0-9_.])/(wor[k]|far[m])/",
    "a task by its number": r"\b[Ii]ssue #?\d",
}


@pytest.mark.parametrize("what", FORBIDDEN)
def test_no_file_names(what: str) -> None:
    pattern = re.compile(FORBIDDEN[what], re.MULTILINE)
    found = [
        f"{path.relative_to(ROOT)}: {match.group()}"
        for path in tracked_files()
        if b"\0" not in (content := path.read_bytes())
        and (match := pattern.search(content.decode("utf-8", errors="replace")))
    ]
    assert found == []


def test_text_is_plain_utf8() -> None:
    for path in tracked_files():
        content = path.read_bytes()
        if b"\0" not in content:
            content.decode("utf-8")
