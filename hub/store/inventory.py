"""Sites, nodes, packs, fittings and calibrations: what is known about the hardware, and since when."""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import Any

from sqlalchemy import Connection, RowMapping, Table, select

from hub.errors import InventoryError
from hub.store import tables as t


@dataclass(frozen=True, slots=True)
class Site:
    """A place."""

    name: str
    latitude: float
    longitude: float
    altitude_m: float = 0.0
    timezone: str = "UTC"
    horizon_notes: str = ""


@dataclass(frozen=True, slots=True)
class Node:
    """A charging device at a site. Accuracies are standard uncertainties; ``None``: as common parts have."""

    name: str
    site: str
    interval_s: float = 60.0
    current_sensing: str = "net"
    standing_load_a: float = 0.0
    panel_power_w: float | None = None
    panel_tilt_deg: float | None = None
    panel_azimuth_deg: float | None = None
    panel_temperature_coefficient: float | None = None
    current_gain_error: float | None = None
    current_offset_a: float | None = None
    voltage_gain_error: float | None = None
    temperature_error_c: float | None = None
    current_full_scale_a: float | None = None
    integration: str = "trapezoid"


@dataclass(frozen=True, slots=True)
class Pack:
    """A battery with an identity of its own; ``commissioned`` is an ISO date."""

    label: str
    designation: str = ""
    cells_in_series: int = 1
    cells_in_parallel: int = 1
    rated_capacity_ah: float = 1.0
    commissioned: str | None = None


@dataclass(frozen=True, slots=True)
class Fitting:
    """Which pack is in which node, from when to when (``None``: still)."""

    pack: str
    node: str
    start_ms: int
    end_ms: int | None = None


@dataclass(frozen=True, slots=True)
class Calibration:
    """From ``start_ms`` to the next one of its quantity, a value is the reading times ``gain`` plus ``offset``."""

    node: str
    quantity: str
    start_ms: int
    gain: float = 1.0
    offset: float = 0.0
    note: str = ""


@dataclass(frozen=True, slots=True)
class Inventory:
    """All of it, each kind in order of its key."""

    sites: tuple[Site, ...] = ()
    nodes: tuple[Node, ...] = ()
    packs: tuple[Pack, ...] = ()
    fittings: tuple[Fitting, ...] = ()
    calibrations: tuple[Calibration, ...] = ()

    def site_of(self, node: Node) -> Site:
        """The site a node stands at."""
        return next(site for site in self.sites if site.name == node.site)

    def node(self, name: str) -> Node:
        """A node by name.

        Raises
        ------
        InventoryError
            There is no such node.
        """
        for node in self.nodes:
            if node.name == name:
                return node
        raise InventoryError(
            f"There is no node “{name}”. Known nodes: {', '.join(n.name for n in self.nodes) or 'none yet'}."
        )

    def pack(self, label: str) -> Pack:
        """A pack by its label.

        Raises
        ------
        InventoryError
            There is no such pack.
        """
        for pack in self.packs:
            if pack.label == label:
                return pack
        raise InventoryError(
            f"There is no pack “{label}”. Known packs: {', '.join(p.label for p in self.packs) or 'none yet'}."
        )

    def fitted(self, node: str) -> tuple[Fitting, ...]:
        """A node's fittings in order of time."""
        return tuple(f for f in self.fittings if f.node == node)


# What tells the entries of a kind apart.
KEYS: Mapping[str, tuple[str, ...]] = {
    "site": ("name",),
    "node": ("name",),
    "pack": ("label",),
    "fitting": ("node", "start_ms"),
    "calibration": ("node", "quantity", "start_ms"),
}

_PACK_LABEL = select(t.pack.c.label).where(t.pack.c.id == t.fitting.c.pack_id).scalar_subquery()
_NODE_OF_FITTING = select(t.node.c.name).where(t.node.c.id == t.fitting.c.node_id).scalar_subquery()
_NODE_OF_CALIBRATION = select(t.node.c.name).where(t.node.c.id == t.calibration.c.node_id).scalar_subquery()
_SITE_OF_NODE = select(t.site.c.name).where(t.site.c.id == t.node.c.site_id).scalar_subquery()


def load(connection: Connection) -> Inventory:
    """The whole inventory."""

    def own(table: Table) -> list[Any]:
        return [c for c in table.c if c.name != "id" and not c.name.endswith("_id")]

    def rows(*columns: Any, order: Iterable[Any]) -> list[RowMapping]:  # noqa: ANN401 - column expressions
        return list(connection.execute(select(*columns).order_by(*order)).mappings())

    fitting, calibration = t.fitting.c, t.calibration.c
    return Inventory(
        tuple(Site(**r) for r in rows(*own(t.site), order=[t.site.c.name])),
        tuple(Node(**r) for r in rows(*own(t.node), _SITE_OF_NODE.label("site"), order=[t.node.c.name])),
        tuple(Pack(**r) for r in rows(*own(t.pack), order=[t.pack.c.label])),
        tuple(
            Fitting(**r)
            for r in rows(
                *own(t.fitting),
                _PACK_LABEL.label("pack"),
                _NODE_OF_FITTING.label("node"),
                order=[_NODE_OF_FITTING, fitting.start_ms],
            )
        ),
        tuple(
            Calibration(**r)
            for r in rows(
                *own(t.calibration),
                _NODE_OF_CALIBRATION.label("node"),
                order=[_NODE_OF_CALIBRATION, calibration.quantity, calibration.start_ms],
            )
        ),
    )


def site_ids(connection: Connection) -> dict[str, int]:
    """Site names and their keys."""
    return {row.name: row.id for row in connection.execute(select(t.site.c.name, t.site.c.id).order_by(t.site.c.name))}


def node_ids(connection: Connection) -> dict[str, int]:
    """Node names and their keys."""
    return {row.name: row.id for row in connection.execute(select(t.node.c.name, t.node.c.id).order_by(t.node.c.name))}


def pack_ids(connection: Connection) -> dict[str, int]:
    """Pack labels and their keys."""
    return {
        row.label: row.id for row in connection.execute(select(t.pack.c.label, t.pack.c.id).order_by(t.pack.c.label))
    }


def node_id(connection: Connection, name: str) -> int:
    """A node's key.

    Raises
    ------
    InventoryError
        There is no such node; the text names those there are.
    """
    known = node_ids(connection)
    if name not in known:
        raise InventoryError(
            f"There is no node “{name}”. Known nodes: {', '.join(known) or 'none yet; load an inventory first'}."
        )
    return known[name]
