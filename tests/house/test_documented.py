"""What an operator can set is written in the README."""

from __future__ import annotations

from service.settings import PREFIX, Settings
from support.house import ROOT


def test_every_setting_is_in_the_readme() -> None:
    readme = (ROOT / "README.md").read_text()
    names = [f"{PREFIX}{name}".upper() for name in Settings.model_fields]
    assert names
    assert [name for name in names if name not in readme] == []
