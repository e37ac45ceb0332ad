"""``packfold credential`` and ``packfold user``."""

import re
import sys

import click

from hub.cli.common import Context, format_option, now_ms, report
from hub.errors import UsageError
from hub.mqtt.credentials import hash_secret, new_secret
from hub.store import inventory, people
from hub.web.passwords import MINIMUM_LENGTH, hash_password


@click.group()
def credential() -> None:
    """Logins of nodes at the broker that the hub starts."""


@credential.command("add")
@click.argument("node")
@format_option
@click.pass_obj
def credential_add(context: Context, node: str, form: str) -> None:
    """Give NODE a login, or a new one in place of the old. The secret is shown once and stored hashed."""
    secret = new_secret()
    with context.database() as database, database.write() as connection:
        people.put_credential(connection, inventory.node_id(connection, node), hash_secret(secret), now_ms())
    broker = context.settings.broker
    document = {"node": node, "username": node, "secret": secret, "host": broker.host, "port": broker.port}
    report(
        form,
        document,
        [
            f"node      {node}",
            f"username  {node}",
            f"secret    {secret}    (shown this once)",
            f"broker    {broker.host}, port {broker.port}",
            f"publishes {broker.root}/{node}/telemetry and {broker.root}/{node}/presence",
            f"reads     {broker.root}/{node}/receipt",
        ],
    )


@credential.command("revoke")
@click.argument("node")
@format_option
@click.pass_obj
def credential_revoke(context: Context, node: str, form: str) -> None:
    """Take NODE's login away. Its history stays."""
    with context.database() as database, database.write() as connection:
        had = people.revoke_credential(connection, inventory.node_id(connection, node))
    report(
        form,
        {"node": node, "revoked": had},
        [f"{node} can no longer log in at the broker." if had else f"{node} had no login."],
    )


@click.group()
def user() -> None:
    """People who may see the pages."""


@user.command("add")
@click.argument("name")
@click.option("--role", type=click.Choice(["keeper", "viewer"]), default="keeper", show_default=True)
@click.option("--password-stdin", is_flag=True, help="Read the password from standard input instead of asking.")
@format_option
@click.pass_obj
def user_add(context: Context, name: str, role: people.Role, password_stdin: bool, form: str) -> None:
    """Add a person, or give one a new password. A keeper may change things, a viewer only look."""
    if not re.fullmatch(r"[\w.@-]{1,64}", name):
        raise UsageError("A name has 1 to 64 letters, digits, “.”, “@”, “_” or “-”.")
    if password_stdin:
        password = sys.stdin.readline().rstrip("\r\n")
    else:
        password = click.prompt("Password", hide_input=True, confirmation_prompt=True, err=True)
    if len(password) < MINIMUM_LENGTH:
        raise UsageError(f"A password needs at least {MINIMUM_LENGTH} characters; a short sentence is a good one.")
    digest = hash_password(password)
    with context.database() as database, database.write() as connection:
        people.put_account(connection, name, digest, role, now_ms())
    report(form, {"name": name, "role": role}, [f"{name} may log in as {role} at {context.settings.web.url}."])


@user.command("list")
@format_option
@click.pass_obj
def user_list(context: Context, form: str) -> None:
    """Who may log in."""
    with context.database() as database, database.read() as connection:
        known = people.accounts(connection)
    report(
        form,
        [{"name": account.name, "role": account.role} for account in known],
        [f"{account.name}  {account.role}" for account in known]
        or ["Nobody yet. Add somebody with “packfold user add NAME”."],
    )


@user.command("remove")
@click.argument("name")
@format_option
@click.pass_obj
def user_remove(context: Context, name: str, form: str) -> None:
    """Remove a person and end their logins."""
    with context.database() as database, database.write() as connection:
        people.remove_account(connection, name)
    report(form, {"name": name, "removed": True}, [f"{name} can no longer log in."])
