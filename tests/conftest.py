"""What every test can ask for. Helpers that are not fixtures are in `support/`."""

from __future__ import annotations

from pathlib import Path


def pytest_ignore_collect(collection_path: Path) -> bool | None:
    """Look for doctests in `service/` only: helpers and benches under `tests/` are not imported."""
    if collection_path.suffix == ".py" and not collection_path.name.startswith("test_"):
        return True
    return None
