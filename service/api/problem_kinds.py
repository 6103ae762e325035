"""Every problem type there is, with the text of its page.

Which error is which type is decided in `problems`. A new type is a new row here; none is ever renamed,
since clients act on them.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True, slots=True)
class Kind:
    """One problem type. `meaning` says what happened and what a client does next."""

    type: str
    status: int
    title: str
    meaning: str


_KINDS = (
    Kind(
        "unparsable",
        400,
        "Cannot be read",
        "What was sent is not the JSON, UTF-8 or CSV it should be.",
    ),
    Kind(
        "unknown-key",
        401,
        "No valid access key",
        "The detail says whether the key is missing, unknown, expired or revoked. Ask whoever "
        "administers this service for a key.",
    ),
    Kind(
        "forbidden",
        403,
        "Not allowed with this key",
        "The key is good, but lacks the scope named in the detail, or is bound to one depot or one "
        "device. Scopes do not include each other.",
    ),
    Kind(
        "not-found",
        404,
        "No such record",
        "There is no such record, or it belongs to another depot.",
    ),
    Kind(
        "method-not-allowed",
        405,
        "Method not allowed",
        "The Allow header names the methods this address takes.",
    ),
    Kind(
        "not-producible",
        406,
        "No such format",
        "This address does not answer in the format asked for; the detail names those it has.",
    ),
    Kind(
        "conflict",
        409,
        "Contradicts what is stored",
        "Read the record again before deciding what to do.",
    ),
    Kind(
        "id-reused",
        409,
        "The id is taken by other content",
        "The same id came before with other content; stored_digest names what is stored. Send the new"
        " content under a new id.",
    ),
    Kind(
        "second-holder",
        409,
        "Another holder has to do this",
        "Two different people have to agree to this, and the holder of this key was already one of them.",
    ),
    Kind(
        "already-void",
        409,
        "The visit is void already",
        "A visit is voided once; who did it, when and why is kept.",
    ),
    Kind(
        "before-last-audit",
        409,
        "A later audit is stored",
        "Audits go forward in time, since findings persist from one to the next.",
    ),
    Kind(
        "feed-diverged",
        409,
        "The feed is not the one you followed",
        "The journal does not hold the line you followed from, as after a restore from a backup. Take"
        " a new snapshot, then follow from its sequence.",
    ),
    Kind(
        "stale",
        412,
        "The record was changed meanwhile",
        "Read it again, decide again, and edit with its new ETag.",
    ),
    Kind(
        "too-large",
        413,
        "Too much at once",
        "The limits of this service are listed at /v1. Send it in parts.",
    ),
    Kind(
        "unsupported-media-type",
        415,
        "Unknown kind of content",
        "The detail names the media types this address takes.",
    ),
    Kind(
        "not-acceptable",
        422,
        "Cannot be accepted",
        "It was understood, but cannot be taken as it is; nothing was written. errors names each "
        "fault. Sending the same again will not help.",
    ),
    Kind(
        "unknown-unit",
        422,
        "Unknown unit",
        "Units are UCUM codes and must fit the quantity: see /v1/quantities.",
    ),
    Kind(
        "unknown-quantity",
        422,
        "Unknown quantity",
        "The quantities this service knows are listed at /v1/quantities.",
    ),
    Kind(
        "unknown-section",
        422,
        "Unknown section",
        "The depot has no track circuit of this name.",
    ),
    Kind(
        "unknown-test-point",
        422,
        "Unknown test point",
        "A test point is feed_end, relay_end, middle, or leg: and the name of a leg.",
    ),
    Kind(
        "unknown-task",
        422,
        "Unknown task",
        "The tasks that the limit books name are listed at /v1/tasks.",
    ),
    Kind(
        "unknown-book",
        422,
        "Unknown limit book",
        "There is no limit book of this name: see /v1/limit-books.",
    ),
    Kind(
        "unknown-parameter",
        422,
        "Unknown query parameter",
        "A misspelt filter must not return everything, so parameters that this address does not know "
        "are refused.",
    ),
    Kind(
        "in-the-future",
        422,
        "Later than now",
        "The instant lies in the future by this service's clock, which server_time gives. Check the "
        "clock of the sender.",
    ),
    Kind(
        "no-answer",
        422,
        "The calculation has no answer",
        "It was asked correctly, but no linear model applies, the circuit is degenerate, or the readings"
        " cannot tell. The code and reason in errors say which; sending the same again will not help.",
    ),
    Kind(
        "precondition-missing",
        428,
        "The edit does not say what it edits",
        "Read the record, and send its ETag in If-Match; to create one, send If-None-Match: *.",
    ),
    Kind(
        "internal",
        500,
        "A fault in this service",
        "What was sent may or may not have been stored; sending the same again is harmless. Tell "
        "whoever runs this service the instance.",
    ),
    Kind(
        "storage-fault",
        500,
        "The database cannot be used",
        "An operator has to act; the detail says what is wrong. Keep what you have, and send the same"
        " again later.",
    ),
    Kind(
        "unavailable",
        503,
        "Busy or unreachable for the moment",
        "The write may or may not have happened: send the same again after Retry-After.",
    ),
)

KINDS = {kind.type: kind for kind in _KINDS}
"""By type."""
