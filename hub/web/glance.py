"""What is known of a node at a glance: plain values that sentences, needs and strips are made from."""

from collections.abc import Mapping
from dataclasses import dataclass, field
from zoneinfo import ZoneInfo

from hub.store.inventory import Fitting, Node, Pack, Site
from hub.web.days import Day
from hub.web.reduction import Binned


@dataclass(frozen=True, slots=True)
class Latest:
    """A value and when it was measured."""

    time_ms: int
    value: float


@dataclass(frozen=True, slots=True)
class End:
    """An end of a charge session, as a strip ticks it."""

    time_ms: int
    full: bool
    confidence: float | None
    ended_by: str | None


@dataclass(frozen=True, slots=True)
class Glance:
    """One node.

    Attributes
    ----------
    node, site, pack, fitting
        The hardware; no pack while none is fitted.
    last_ms
        Newest reading.
    latest
        Newest value by quantity, and ``cell_voltage`` where the pack is known.
    peak_temperature
        Highest pack temperature of the last 24 h.
    presence
        The node's last word about itself: ``online``, ``offline`` or nothing.
    days, today
        The days before today since the node was first heard, at most seven, oldest first; and today so far.
    last_full_ms
        Newest full charge of the fitted pack that is known.
    ends
        Ends of charge in the strip's span.
    findings
        Values kept out by screening in the last seven days, by quantity and reason.
    set_aside
        What could not be used in the last seven days, by reason.
    traces
        Reduced traces of the strip's span by name: ``cell_voltage``, ``pack_temperature``.
    """

    node: Node
    site: Site
    zone: ZoneInfo
    pack: Pack | None = None
    fitting: Fitting | None = None
    last_ms: int | None = None
    latest: Mapping[str, Latest] = field(default_factory=dict)
    peak_temperature: Latest | None = None
    presence: str | None = None
    days: tuple[Day, ...] = ()
    today: Day | None = None
    last_full_ms: int | None = None
    ends: tuple[End, ...] = ()
    findings: Mapping[tuple[str, str], int] = field(default_factory=dict)
    set_aside: Mapping[str, int] = field(default_factory=dict)
    traces: Mapping[str, Binned] = field(default_factory=dict)
