"""Access keys: issued, listed, revoked, and recognised when they come back.

A key is 256 random bits, shown once and kept as its SHA-256. What a scope lets a caller do is decided by
the routes.
"""

from __future__ import annotations

import base64
from collections.abc import Collection
from contextlib import suppress
from dataclasses import dataclass
from datetime import datetime, timedelta
from typing import Any

import sqlalchemy as sa
from sqlalchemy.engine import Connection, RowMapping

from service.application.context import Service
from service.errors import (
    ConflictError,
    Fault,
    NotAcceptableError,
    NotFoundError,
    StorageFaultError,
    UnavailableError,
    UnknownKeyError,
)
from service.records import journal
from service.records.engine import digest_of
from service.records.tables import AccessKey
from service.records.unit_of_work import Transaction

SCOPES = ("read", "readings", "register", "limits", "audit", "admin")
"""They do not include each other."""

PREFIX = "sbk_"
"""By which people and secret scanners know a key of this service."""

USE_NOTED_EVERY = timedelta(minutes=5)

_key = AccessKey.__table__  # type: ignore[attr-defined]

_BY_DIGEST = sa.select(_key).where(_key.c.digest == sa.bindparam("digest"))  # run for every request


@dataclass(frozen=True, slots=True)
class Key:
    """What is known of a key; never the key itself. `depot` None: good for every depot."""

    label: str
    holder: str
    scopes: frozenset[str]
    depot: str | None
    device: str | None
    created_at: datetime
    expires_at: datetime | None
    revoked_at: datetime | None
    last_used_at: datetime | None


@dataclass(frozen=True, slots=True)
class Wanted:
    """A key to be issued."""

    label: str
    holder: str
    scopes: Collection[str]
    depot: str | None = None
    device: str | None = None
    expires_at: datetime | None = None


def create(tx: Transaction, wanted: Wanted, entropy: bytes) -> str:
    """Issue a key and return its text, which is kept nowhere.

    Raises
    ------
    NotAcceptableError
        If a scope is unknown or none is given, or the key would be expired from the start.
    NotFoundError
        If its depot does not exist.
    ConflictError
        If the label is taken: a revoked key keeps its label.
    """
    _check(wanted, tx.now)
    if wanted.depot is not None:
        tx.lock_depot(wanted.depot)
    if _row(tx.connection, wanted.label) is not None:
        raise ConflictError("There is already a key of this label.")
    text = PREFIX + base64.urlsafe_b64encode(entropy).decode().rstrip("=")
    values = {
        "label": wanted.label,
        "holder": wanted.holder,
        "scopes": " ".join(sorted(set(wanted.scopes))),
        "depot": wanted.depot,
        "device": wanted.device,
        "created_at": tx.now,
        "expires_at": wanted.expires_at,
    }
    tx.connection.execute(sa.insert(_key).values(digest=digest_of(text), **values))
    _journal(tx, "key_created", wanted.label)
    return text


def revoke(tx: Transaction, label: str) -> None:
    """Make a key useless from now on; one that is revoked already stays as it is."""
    row = _row(tx.connection, label)
    if row is None:
        raise NotFoundError("There is no key of this label.")
    if row["revoked_at"] is None:
        tx.connection.execute(sa.update(_key).where(_key.c.label == label).values(revoked_at=tx.now))
        _journal(tx, "key_revoked", label)


def listed(connection: Connection) -> list[Key]:
    """Every key ever issued, in order of label."""
    rows = connection.execute(sa.select(_key).order_by(_key.c.label)).mappings()
    return [_of(row) for row in rows]


def authenticate(connection: Connection, text: str, now: datetime) -> Key:
    """The key whose text this is.

    Raises
    ------
    UnknownKeyError
        If there is none, or it has expired or was revoked; the detail says which.
    """
    row = connection.execute(_BY_DIGEST, {"digest": digest_of(text)}).mappings().one_or_none()
    if row is None:
        raise UnknownKeyError("The access key is not known here.")
    key = _of(row)
    if key.revoked_at is not None:
        raise UnknownKeyError("The access key was revoked.")
    if key.expires_at is not None and key.expires_at <= now:
        raise UnknownKeyError("The access key has expired.")
    return key


def use_is_due(key: Key, now: datetime) -> bool:
    """Whether it is time to note again that the key is in use."""
    return key.last_used_at is None or now - key.last_used_at >= USE_NOTED_EVERY


def note_use(service: Service, label: str) -> None:
    """Note the use of a key, in a transaction of its own. A busy database may let it pass."""
    now = service.clock()
    due = sa.or_(_key.c.last_used_at.is_(None), _key.c.last_used_at <= now - USE_NOTED_EVERY)
    with suppress(UnavailableError, StorageFaultError), service.database.write() as connection:
        connection.execute(sa.update(_key).where(_key.c.label == label, due).values(last_used_at=now))


def _check(wanted: Wanted, now: datetime) -> None:
    faults = []
    if not wanted.scopes or set(wanted.scopes) - set(SCOPES):
        faults.append(Fault("scope", f"a key has one or more of the scopes {', '.join(SCOPES)}"))
    if not wanted.holder or wanted.holder != wanted.holder.strip() or not wanted.holder.isprintable():
        # two holders are told apart by these letters, so nothing unseen may make one person two
        faults.append(Fault("holder", "a key has a holder: one line, with no blanks at its ends"))
    if wanted.expires_at is not None and wanted.expires_at <= now:
        faults.append(Fault("expired", "the key would have expired already"))
    if faults:
        raise NotAcceptableError("The key cannot be issued:", tuple(faults))


def _row(connection: Connection, label: str) -> RowMapping | None:
    return connection.execute(sa.select(_key).where(_key.c.label == label)).mappings().one_or_none()


def _journal(tx: Transaction, action: str, label: str) -> None:
    row = _row(tx.connection, label)
    assert row is not None
    entry = journal.Entry(action, "key", label, (), content(_of(row)))
    tx.append(journal.SERVICE, [entry])


def content(key: Key) -> dict[str, Any]:
    """The key as its journal lines and the operator's list show it."""

    def instant(at: datetime | None) -> str | None:
        return None if at is None else journal.instant_text(at)

    return {
        "label": key.label,
        "holder": key.holder,
        "scopes": sorted(key.scopes),
        "depot": key.depot,
        "device": key.device,
        "created_at": instant(key.created_at),
        "expires_at": instant(key.expires_at),
        "revoked_at": instant(key.revoked_at),
    }


def _of(row: RowMapping) -> Key:
    return Key(
        label=row["label"],
        holder=row["holder"],
        scopes=frozenset(row["scopes"].split()),
        depot=row["depot"],
        device=row["device"],
        created_at=row["created_at"],
        expires_at=row["expires_at"],
        revoked_at=row["revoked_at"],
        last_used_at=row["last_used_at"],
    )
