"""What can go wrong, as classes that carry data.

Nothing here knows HTTP: `api/problems.py` maps each class to a status and a problem type.
A limit that is not met is a result, never an exception.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Fault:
    """One thing wrong with what was sent, and where.

    `pointer` is an RFC 6901 pointer into the JSON sent, `parameter` a query or path parameter,
    `line` and `column` a place in a CSV file. Never echoes the offending value.
    """

    code: str
    reason: str
    pointer: str | None = None
    parameter: str | None = None
    line: int | None = None
    column: str | None = None


class ShuntbookError(Exception):
    """Base of every error of this service; `str()` of it is fit to show to a client."""

    def __init__(self, detail: str, faults: tuple[Fault, ...] = ()) -> None:
        super().__init__(detail)
        self.detail = detail
        self.faults = faults


class NotAcceptableError(ShuntbookError):
    """Understood, but it cannot be taken as it is; nothing was written."""


class UnparsableError(ShuntbookError):
    """What was sent cannot be read at all (not JSON, not UTF-8, not CSV)."""


class TooLargeError(ShuntbookError):
    """More was sent at once than this service takes."""


class UnknownKeyError(ShuntbookError):
    """No access key, or one that is unknown, expired or revoked (the detail says which)."""


class ForbiddenError(ShuntbookError):
    """The key is good but does not carry the scope, or is bound to another device."""


class NotFoundError(ShuntbookError):
    """No such record in this depot (also said of another depot's records)."""


class ConflictError(ShuntbookError):
    """What was asked contradicts what is stored."""

    def __init__(
        self,
        detail: str,
        faults: tuple[Fault, ...] = (),
        *,
        kind: str = "conflict",
        stored_digest: str | None = None,
    ) -> None:
        super().__init__(detail, faults)
        self.kind = kind
        self.stored_digest = stored_digest


class StaleError(ShuntbookError):
    """The record was changed since the caller read it."""


class PreconditionMissingError(ShuntbookError):
    """An edit without saying which version it edits."""


class UnavailableError(ShuntbookError):
    """Transient: busy, locked, or the database went away. Post the same again later."""


class StorageFaultError(ShuntbookError):
    """The database cannot be used until an operator acts (corrupt, read-only, not migrated)."""


class NonPhysicalError(ShuntbookError):
    """An electrical input that no real circuit has. `field` is the path inside the circuit.

    For example `("line", "length_m")`; the caller turns it into a pointer.
    """

    def __init__(self, field: tuple[str | int, ...], reason: str) -> None:
        super().__init__(f"{'.'.join(str(part) for part in field)}: {reason}")
        self.field = field
        self.reason = reason


class NoAnswerError(ShuntbookError):
    """The electrical question has no answer: degenerate, ill-conditioned or no linear model.

    `reason` says why in words; `code` is stable.
    """

    def __init__(self, code: str, reason: str) -> None:
        super().__init__(reason, (Fault(code, reason),))
        self.code = code
        self.reason = reason
