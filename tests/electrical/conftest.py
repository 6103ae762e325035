"""Hypothesis without a deadline: a first call imports SciPy, and a busy machine is no fault of a model."""

from __future__ import annotations

from hypothesis import settings

settings.register_profile("no-deadline", deadline=None)
settings.load_profile("no-deadline")
