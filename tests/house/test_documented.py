"""What an operator can set is written in the README."""

from __future__ import annotations

import importlib

import pytest

from support import house


@pytest.mark.skipif(
    not (house.SERVICE / "settings.py").exists(), reason="service/settings.py is not written yet"
)
def test_every_setting_is_in_the_readme() -> None:
    settings = importlib.import_module("service.settings").Settings
    prefix = settings.model_config.get("env_prefix", "")
    readme = (house.ROOT / "README.md").read_text()
    names = [f"{prefix}{name}".upper() for name in settings.model_fields]
    assert names
    assert [name for name in names if name not in readme] == []
