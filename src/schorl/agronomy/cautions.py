"""The usual cautions, the same words in report, sheet and notes beside the files."""

from __future__ import annotations

from schorl.agronomy.tables import table


def cautions(*, foliar: bool = False) -> tuple[str, ...]:
    """Cautions for a prescription, most general first; those of a foliar pass on request."""
    wanted = {"all", "handling"} | ({"foliar"} if foliar else set())
    return tuple(row["text"] for row in table("cautions") if row["applies"] in wanted)
