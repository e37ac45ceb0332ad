"""What a node sent before it was enrolled: taken in once it is."""

from hub.errors import PayloadError
from hub.store import aside, intake, inventory
from hub.store.engine import Database
from hub.telemetry.message import Remark
from hub.telemetry.senml import decode


def take_in(database: Database) -> dict[str, int]:
    """Take in what waits for nodes that are enrolled now; readings stored by node, for nodes with any.

    Each message leaves the things set aside in the transaction that stores it, so that stopping in between loses
    nothing and stores nothing twice. Relative times count from the moment of receipt, as they would have then.
    """
    with database.read() as connection:
        ids = inventory.node_ids(connection)
    taken = {name: _take_in(database, name, node_id) for name, node_id in ids.items()}
    return {name: number for name, number in taken.items() if number}


def _take_in(database: Database, name: str, node_id: int) -> int:
    number = 0
    while True:
        with database.write() as connection:
            found = aside.waiting(connection, name)
            if not found:
                return number
            stored = intake.take(connection, [_incoming(message, name, node_id) for message in found])
            aside.forget(connection, {message.id for message in found})
            number += stored.new


def _incoming(message: aside.Waiting, name: str, node_id: int) -> intake.Incoming:
    origin = aside.Origin("mqtt", message.topic, node_id, name, message.received_ms)
    try:
        return intake.Incoming(origin, message.payload, decode(message.payload, message.received_ms))
    except PayloadError as error:
        return intake.Incoming(origin, message.payload, None, Remark("malformed", str(error)))
