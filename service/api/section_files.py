"""Files of sections: each line held against the wire schema, each fault named by line and column.

Used by the import route and by the command that imports.
"""

from __future__ import annotations

import json

from service.api import bodies, bounds
from service.api.schemas.sections import SectionLine
from service.application import sections_csv
from service.application.sections_import import File, Item
from service.errors import Fault, NotAcceptableError


def read(content: bytes) -> File:
    """The sections in a CSV file.

    Raises
    ------
    UnparsableError, TooLargeError
        If it is not CSV in UTF-8, or too long.
    NotAcceptableError
        Naming every bad line with its column.
    """
    given = sections_csv.read(content, bounds.IMPORT_LINES)
    items: list[Item] = []
    faults: list[Fault] = []
    for line in given.lines:
        try:
            sent = bodies.parse(SectionLine, json.dumps(line.document).encode())
        except NotAcceptableError as error:
            faults += [sections_csv.at(fault, line.line) for fault in error.faults]
        else:
            items.append(Item(line.line, sent.section, sent.version, sent.content()))
    if faults:
        raise NotAcceptableError("The file cannot be imported; nothing was written.", tuple(faults))
    return File(tuple(items), given.missing)
