"""API keys: shown once, kept as hashes, revoked by their short name.

A key is 256 random bits, so a plain SHA-256 of it cannot be turned back by guessing; a slow
password hash would only slow requests down.
"""

from __future__ import annotations

import hashlib
import hmac
import secrets
import threading
import time
from dataclasses import dataclass

import sqlalchemy as sa

from ladderband.jobs.database import Database, StorageUnavailable
from ladderband.jobs.records import api_key

PREFIX = "lbk_"

FRESH_S = 2.0
"""How long a web process trusts its copy of the keys; a revoked key works no longer than this."""


@dataclass(frozen=True, slots=True)
class KeyInfo:
    """A key without its secret; times in seconds since 1970."""

    id: str
    name: str
    created: float
    revoked: float | None


def add_key(database: Database, name: str) -> tuple[KeyInfo, str]:
    """Make a key; the second value is the secret, which is not kept."""
    secret = PREFIX + secrets.token_urlsafe(32)
    with database.writing() as connection:
        info = KeyInfo("k" + secrets.token_hex(6), name, database.now(connection), None)
        connection.execute(
            sa.insert(api_key).values(
                id=info.id, name=name, digest=_digest(secret), created=info.created
            )
        )
    return info, secret


def list_keys(database: Database) -> list[KeyInfo]:
    """All keys, oldest first, revoked ones included."""
    columns = api_key.c.id, api_key.c.name, api_key.c.created, api_key.c.revoked
    with database.reading() as connection:
        rows = connection.execute(sa.select(*columns).order_by(api_key.c.created)).all()
    return [KeyInfo(*row) for row in rows]


def revoke_key(database: Database, ident: str) -> bool:
    """End a key's validity; False when there is no such valid key. Its jobs stay on record."""
    with database.writing() as connection:
        changed = connection.execute(
            sa.update(api_key)
            .where(api_key.c.id == ident, api_key.c.revoked.is_(None))
            .values(revoked=database.now(connection))
        )
    return changed.rowcount == 1


class KeyRing:
    """The valid keys as a web process knows them; usable from all threads.

    While the database is away the last known keys stay valid, so that small requests, which need no
    database, are still answered.
    """

    def __init__(self, database: Database) -> None:
        self._database = database
        self._lock = threading.Lock()
        self._keys: dict[str, str] = {}  # digest -> id
        self._read_at = float("-inf")

    @property
    def required(self) -> bool:
        """True as soon as one valid key exists."""
        return bool(self._current())

    def owner(self, secret: str) -> str | None:
        """The id of the key; None when it is not valid."""
        wanted = _digest(secret)
        for digest, ident in self._current().items():
            if hmac.compare_digest(digest, wanted):
                return ident
        return None

    def _current(self) -> dict[str, str]:
        with self._lock:
            if time.monotonic() - self._read_at > FRESH_S:
                self._read_at = time.monotonic()
                try:
                    self._keys = self._read()
                except StorageUnavailable:
                    if not self._keys:
                        raise
            return self._keys

    def _read(self) -> dict[str, str]:
        query = sa.select(api_key.c.digest, api_key.c.id).where(api_key.c.revoked.is_(None))
        with self._database.reading() as connection:
            return {row.digest: row.id for row in connection.execute(query)}


def _digest(secret: str) -> str:
    return hashlib.sha256(secret.encode()).hexdigest()
