"""The service starts, and documents itself, without the libraries that only calculations need."""

from __future__ import annotations

import subprocess
import sys

PROGRAM = """
import sys
from service.app import create_app
from service.settings import Settings
create_app(Settings(database_url="sqlite://")).openapi()
print(sorted({name.partition(".")[0] for name in sys.modules} & {"numpy", "scipy"}))
"""


def test_no_numpy_until_it_is_asked_for() -> None:
    done = subprocess.run([sys.executable, "-c", PROGRAM], capture_output=True, text=True, check=True)
    assert done.stdout.strip() == "[]"
