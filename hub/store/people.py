"""Who may come in: people, their logins, and the nodes' credentials. Only digests of secrets are kept."""

import hashlib
import secrets
from dataclasses import dataclass, field
from typing import Literal

from sqlalchemy import Connection, delete, select, update

from hub.errors import UsageError
from hub.store import tables as t
from hub.store.facts import get, put

Role = Literal["keeper", "viewer"]
PassKind = Literal["session", "token", "link"]


@dataclass(frozen=True, slots=True)
class Account:
    """A person who may see the pages. A keeper may also change things."""

    id: int
    name: str
    role: Role
    password_hash: str = field(repr=False)
    created_ms: int


def accounts(connection: Connection) -> list[Account]:
    """All accounts by name."""
    return [Account(**row) for row in connection.execute(select(t.account).order_by(t.account.c.name)).mappings()]


def account(connection: Connection, name: str) -> Account | None:
    """An account by its name."""
    row = connection.execute(select(t.account).where(t.account.c.name == name)).mappings().one_or_none()
    return Account(**row) if row else None


def put_account(connection: Connection, name: str, password_hash: str, role: Role, now_ms: int) -> None:
    """Add an account, or give it a new password and role; its logins end."""
    known = account(connection, name)
    if known is None:
        connection.execute(
            t.account.insert().values(name=name, password_hash=password_hash, role=role, created_ms=now_ms)
        )
        return
    connection.execute(delete(t.pass_).where(t.pass_.c.account_id == known.id))
    connection.execute(
        update(t.account).where(t.account.c.id == known.id).values(password_hash=password_hash, role=role)
    )


def remove_account(connection: Connection, name: str) -> None:
    """Remove an account and end its logins."""
    known = account(connection, name)
    if known is None:
        raise UsageError(f"There is no user “{name}”. See them with “packfold user list”.")
    connection.execute(delete(t.pass_).where(t.pass_.c.account_id == known.id))
    connection.execute(delete(t.account).where(t.account.c.id == known.id))


def grant(
    connection: Connection,
    account_id: int,
    kind: PassKind,
    now_ms: int,
    *,
    lasts_ms: int | None = None,
    label: str = "",
) -> str:
    """A new login, token or one-use link; the secret is returned once and only its digest kept."""
    secret = secrets.token_urlsafe(32)
    connection.execute(
        t.pass_.insert().values(
            digest=digest(secret),
            account_id=account_id,
            kind=kind,
            label=label,
            created_ms=now_ms,
            expires_ms=None if lasts_ms is None else now_ms + lasts_ms,
        )
    )
    connection.execute(delete(t.pass_).where(t.pass_.c.expires_ms < now_ms))
    return secret


def holder(connection: Connection, secret: str, kind: PassKind, now_ms: int) -> Account | None:
    """Whose pass this is, if it is of that kind and still valid."""
    p = t.pass_.c
    row = (
        connection.execute(
            select(t.account)
            .join(t.pass_, p.account_id == t.account.c.id)
            .where(p.digest == digest(secret), p.kind == kind, (p.expires_ms.is_(None)) | (p.expires_ms >= now_ms))
        )
        .mappings()
        .one_or_none()
    )
    return Account(**row) if row else None


def withdraw(connection: Connection, secret: str) -> bool:
    """End a login, token or link; whether there was one."""
    return connection.execute(delete(t.pass_).where(t.pass_.c.digest == digest(secret))).rowcount > 0


def digest(secret: str) -> str:
    """What is kept of a secret with 256 random bits; such a one needs no slow hash."""
    return hashlib.sha256(secret.encode("utf-8", "surrogatepass")).hexdigest()


@dataclass(frozen=True, slots=True)
class Credential:
    """A node's login at the broker; the hash is in the form of mosquitto's password file."""

    node_id: int
    username: str
    secret_hash: str = field(repr=False)


def credentials(connection: Connection) -> list[Credential]:
    """All nodes' credentials by name."""
    rows = connection.execute(
        select(t.credential.c.node_id, t.node.c.name, t.credential.c.secret_hash)
        .join(t.node, t.node.c.id == t.credential.c.node_id)
        .order_by(t.node.c.name)
    )
    return [Credential(row.node_id, row.name, row.secret_hash) for row in rows]


def put_credential(connection: Connection, node_id: int, secret_hash: str, now_ms: int) -> None:
    """Give a node a credential; an older one stops working."""
    connection.execute(delete(t.credential).where(t.credential.c.node_id == node_id))
    connection.execute(t.credential.insert().values(node_id=node_id, secret_hash=secret_hash, created_ms=now_ms))
    _touch(connection)


def revoke_credential(connection: Connection, node_id: int) -> bool:
    """Take a node's credential away; whether it had one."""
    found = connection.execute(delete(t.credential).where(t.credential.c.node_id == node_id)).rowcount > 0
    _touch(connection)
    return found


def credentials_version(connection: Connection) -> int:
    """Grows with each change of credentials, so that the broker's files are written anew when they must be."""
    return int(get(connection, "credentials_version") or 0)


def _touch(connection: Connection) -> None:
    put(connection, "credentials_version", str(credentials_version(connection) + 1))
