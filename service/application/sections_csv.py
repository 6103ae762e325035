"""The register as CSV: documents to lines and back.

Whether a document is a section is not decided here, nor what becomes of it (`sections_import`).
"""

from __future__ import annotations

import csv
import io
import json
import re
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

from service.application.csv_cells import BOM, guarded, unguarded
from service.application.section_columns import COLUMNS, CONTENT, NAMES, OWN, Column
from service.errors import Fault, NotAcceptableError, TooLargeError, UnparsableError

_NUMBER = re.compile(r"-?(0|[1-9][0-9]*)(\.[0-9]+)?([eE][+-]?[0-9]+)?")
_GIVEN = {column.name: column for column in (*NAMES, *CONTENT)}


@dataclass(frozen=True, slots=True)
class Line:
    """One record of a file: the line it begins on and what it says."""

    line: int
    document: dict[str, Any]


@dataclass(frozen=True, slots=True)
class Lines:
    """What a file says. `missing` are the columns it lacks."""

    lines: tuple[Line, ...]
    missing: tuple[str, ...]


def write(documents: Iterable[Mapping[str, Any]]) -> Iterator[str]:
    """A CSV file in pieces: BOM, header, a line a document."""
    out = io.StringIO(newline="")
    lines = csv.writer(out, lineterminator="\r\n")
    lines.writerow([column.name for column in COLUMNS])
    yield BOM + out.getvalue()
    for document in documents:
        out.seek(0)
        out.truncate()
        lines.writerow([_cell(document, column) for column in COLUMNS])
        yield out.getvalue()


def _cell(document: Mapping[str, Any], column: Column) -> str:
    value = _at(document, column.inside or column.path)
    if value is None:
        return ""
    if column.inside is not None:
        value = [_at(one, column.path[len(column.inside) :]) for one in value]
    if column.kind == "json":
        return json.dumps(value, ensure_ascii=False, separators=(",", ":"))
    text = ";".join(map(_text, value)) if column.listed else _text(value)
    return text if _NUMBER.fullmatch(text) and column.kind != "text" else guarded(text)


def _at(document: Any, path: tuple[str, ...]) -> Any:
    for name in path:
        if document is None:
            return None
        document = document.get(name)
    return document


def _text(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    return "" if value is None else str(value)


def read(content: bytes, most: int) -> Lines:
    """The records of a file, up to `most` of them.

    Raises
    ------
    UnparsableError
        If it is not CSV in UTF-8.
    TooLargeError
        If it has more.
    NotAcceptableError
        Naming each column that is unknown, or each cell that cannot be what it should.
    """
    records = _records(content)
    _, header = next(records, (1, []))
    columns = _header(header)
    lines: list[Line] = []
    faults: list[Fault] = []
    for line, cells in records:
        if len(lines) >= most:
            raise TooLargeError(f"A file of sections holds at most {most} of them.")
        document, wrong = _document(line, columns, cells)
        faults += wrong
        lines.append(Line(line, document))
    if faults:
        raise NotAcceptableError("The file cannot be imported; nothing was written.", tuple(faults))
    return Lines(tuple(lines), tuple(name for name in _GIVEN if name not in header))


def _records(content: bytes) -> Iterator[tuple[int, list[str]]]:
    """Each record with the line it begins on; blank lines are passed over."""
    try:
        text = content.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        fault = Fault("not_utf8", "is not UTF-8", line=content.count(b"\n", 0, error.start) + 1)
        raise UnparsableError("The file is not UTF-8.", (fault,)) from None
    reader = csv.reader(io.StringIO(text, newline=""), strict=True)
    begins = 1
    try:
        for cells in reader:
            if cells:
                yield begins, cells
            begins = reader.line_num + 1
    except csv.Error as error:
        raise UnparsableError("The file is not CSV.", (Fault("not_csv", str(error), line=begins),)) from None


def _header(header: list[str]) -> list[Column | None]:
    """The column of each cell, None for the service's own."""
    known: dict[str, Column | None] = dict.fromkeys(column.name for column in OWN)
    known |= _GIVEN
    faults = [
        Fault("unknown_column", "is no column of a section", line=1, column=name[:80])
        for name in header
        if name not in known
    ]
    faults += [
        Fault("duplicate", "this column is there twice", line=1, column=name)
        for name in sorted(known.keys() & {name for name in header if header.count(name) > 1})
    ]
    if faults:
        raise NotAcceptableError("The columns are not those of sections; nothing was written.", tuple(faults))
    return [known[name] for name in header]


def _document(
    line: int, columns: list[Column | None], cells: list[str]
) -> tuple[dict[str, Any], list[Fault]]:
    if len(cells) != len(columns):
        reason = f"has {len(cells)} cells under {len(columns)} columns"
        return {}, [Fault("cells", reason, line=line)]
    document: dict[str, Any] = {}
    faults = []
    for column, cell in zip(columns, cells, strict=True):
        if column is None or cell == "":
            continue
        try:
            _put(document, column, unguarded(cell))
        except ValueError as error:
            faults.append(Fault(f"not_{column.kind}", str(error), line=line, column=column.name))
    return document, faults


def _put(document: dict[str, Any], column: Column, text: str) -> None:
    """Set what a cell says. Objects of a list are found, or made, by their position."""
    path = column.path if column.inside is None else column.inside
    for name in path[:-1]:
        document = document.setdefault(name, {})
    if column.inside is not None:
        values = [None if part == "" else _value(column.kind, part) for part in text.split(";")]
        objects = document.setdefault(path[-1], [])
        objects.extend({} for _ in range(len(values) - len(objects)))
        for one, value in zip(objects, values, strict=False):
            one[column.path[-1]] = value
    elif column.listed:
        document[path[-1]] = [_value(column.kind, part) for part in text.split(";")]
    else:
        document[path[-1]] = _value(column.kind, text)


def _value(kind: str, text: str) -> Any:
    """The JSON value of a text; ValueError says in words why it is none."""
    if kind == "text":
        return text
    if kind == "boolean":
        if text.lower() not in ("true", "false"):
            raise ValueError("must be true or false")
        return text.lower() == "true"
    if kind == "json":
        return _json(text)
    if kind == "integer" and re.fullmatch(r"-?[0-9]{1,15}", text):
        return int(text)
    if kind == "number" and _NUMBER.fullmatch(text):
        return float(text)
    raise ValueError(
        "must be a whole number" if kind == "integer" else "must be a number with a decimal point"
    )


def _json(text: str) -> Any:
    try:
        return json.loads(text)
    except (ValueError, RecursionError):
        raise ValueError("must be JSON") from None


def at(fault: Fault, line: int) -> Fault:
    """A fault of a document, named by its line and the column it lies in."""
    parts = [part for part in (fault.pointer or "").split("/")[1:] if not part.isdigit()]
    while parts and ".".join(parts) not in _GIVEN:
        parts.pop()
    return Fault(fault.code, fault.reason, line=line, column=".".join(parts) or None)
