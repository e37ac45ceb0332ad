"""What the hub itself needs a person for: receiving or computing that does not get on."""

from collections.abc import Mapping
from typing import Any

from hub.web.needs import Need
from hub.web.words import count

# Before heat nothing comes; a hub that does not receive comes before everything it would tell about nodes.
RECEIVING_RANK = 2
COMPUTING_RANK = 4


def hub_needs(status: Mapping[str, Any]) -> list[Need]:
    """What the parts of this hub that run in this process say is wrong.

    Parameters
    ----------
    status
        What each part says about itself, by its name; parts that run elsewhere are absent.
    """
    collector, analysis = status.get("collector") or {}, status.get("analysis") or {}
    found = [
        Need(
            RECEIVING_RANK,
            "receiving",
            "",
            "The hub does not receive as it should.",
            str(problem),
        )
        for problem in (*(collector.get("problems") or ()), (status.get("clock") or {}).get("problem"))
        if problem
    ]
    failures = analysis.get("failures_in_a_row") or 0
    if failures:
        reason = str(analysis.get("last_error") or "it did not say why").rstrip(".")
        found.append(
            Need(
                COMPUTING_RANK,
                "computing",
                "",
                "The figures are not up to date.",
                f"Bringing them up to date failed {count(failures, 'time')} in a row: {reason}. "
                "Run “packfold selfcheck” on the hub's machine; readings are received and kept meanwhile.",
            )
        )
    return found
