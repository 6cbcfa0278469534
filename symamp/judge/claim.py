"""Claims (room: judge): hand formulas for quantities, as a stage file or an option writes them, read into records."""

from __future__ import annotations

from dataclasses import dataclass

from symamp.exact.asked_quantity import Quantity
from symamp.formula import Node


@dataclass(frozen=True)
class Claim:
    """A hand formula for a quantity, and the error that it is allowed.

    `formula` is the text as written, `node` its tree: every name in it is a symbol or an alias of the stage.
    `within` is a ratio where `within_unit` is "", else in dB or degrees. `decibels` says that the formula of a
    quantity in dB is in dB itself ("40 dB"); else it is that of the quantity, and is put into dB.
    `key` is where it was written, for messages: `claim.1`, or `--claim`.
    """

    response: str
    quantity: Quantity
    formula: str
    node: Node
    within: float
    within_unit: str = ""
    decibels: bool = False
    key: str = "claim"

    @property
    def about(self) -> str:
        """The quantity's name, `gain.dc`."""
        return f"{self.response}.{self.quantity.text}"
