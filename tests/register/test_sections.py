"""Sections of the register and their versions, on both databases."""

from __future__ import annotations

from dataclasses import replace
from datetime import date, timedelta

import pytest

from service.application import sections
from service.application.section_content import Boundary
from service.errors import ConflictError, NotAcceptableError, NotFoundError, StaleError
from service.records import journal
from service.rules.words import SectionState, Separation


def plain_of(recorded):
    return recorded.content


def test_a_section_is_read_as_it_was_recorded(depot):
    made = depot.section("TV114", title="TV 114", length_m=812.5, from_km=12.0, to_km=12.8125)
    found = depot.read(sections.get, "TV114")
    assert found == made
    assert (found.version, found.content.valid_from_on) == (1, depot.today)
    assert found.content.length_m == 812.5
