"""Cells of CSV files: what a spreadsheet would take for a formula, and is kept from doing so.

Files are RFC 4180 in UTF-8 with BOM; lists in a cell are joined by `;`. Text only: a number is never
touched, so that it stays one.
"""

from __future__ import annotations

import re

BOM = "\ufeff"

_LIKE_FORMULA = re.compile(r"'*[=+\-@\t\r\n]")
"""Also with apostrophes before it, so that one can be put on and taken off again."""


def guarded(text: str) -> str:
    """The text with an apostrophe before it where a spreadsheet would take it for a formula."""
    return f"'{text}" if _LIKE_FORMULA.match(text) else text


def unguarded(text: str) -> str:
    """The text that `guarded` was given."""
    return text[1:] if text.startswith("'") and _LIKE_FORMULA.match(text) else text
