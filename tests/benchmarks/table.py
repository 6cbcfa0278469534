"""All benchmarks by name, and the table that they print."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from rich.console import Console
from rich.table import Table

from . import deriving, graphs, growing, ledgers, proving, rooting, shortening, starting, writing_out
from .record import Row, Sizes

BENCHMARKS: dict[str, Callable[[Sizes], list[Row]]] = {
    "derive": deriving.derivation,
    "graphs": graphs.graphs,
    "responses": graphs.responses,
    "growth": growing.growth,
    "coefficients": deriving.coefficients,
    "written out": writing_out.written_out,
    "nested": writing_out.nested_coefficients,
    "ledger": ledgers.ledger,
    "memory": ledgers.memory,
    "proofs": proving.proofs,
    "shorten": shortening.shortest,
    "start": starting.cold_start,
    "roots": rooting.batches,
}


def printed(rows: Iterable[Row], console: Console) -> None:
    """Print the rows as one table."""
    table = Table("what", "to reach", "measured", "ratio", "met", "agrees to")
    for row in rows:
        agreement = f"{row.disagreement:.1e}" + ("" if row.agrees else " NO")
        table.add_row(
            row.what, row.target, row.measured, f"{row.ratio:.3g}", "yes" if row.met else "NO", agreement
        )
    console.print(table)
