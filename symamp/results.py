"""What judgements of a stage are in Python: plain results that print as in the terminal and show in a notebook."""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from symamp.circuit.stage import Stage as StageData
from symamp.judge.frontier import ClaimFrontier
from symamp.judge.ledger import Account, Ledger
from symamp.judge.shortest import Shortening, Shortest, ShortestResponse
from symamp.judge.verdict import Check, Judged
from symamp.show.check_html import check_html, frontier_html
from symamp.show.check_text import check_page
from symamp.show.claims_json import check_json, frontier_json
from symamp.show.frontier_text import frontier_page
from symamp.show.html import ledger_html
from symamp.show.json_parts import ledger_json
from symamp.show.ledger_text import ledger_page
from symamp.show.page import Page
from symamp.show.shorten_json import shorten_json
from symamp.show.shorten_text import shorten_page


class StageLedger:
    """A ledger: `ledger["gain.dc"]` is one account; it prints as in the terminal and shows itself in a notebook."""

    def __init__(self, plain: Ledger) -> None:
        self.plain = plain

    @property
    def accounts(self) -> tuple[Account, ...]:
        """The accounts, one a quantity."""
        return self.plain.accounts

    def __getitem__(self, name: str) -> Account:
        return self.plain[name]

    def __iter__(self) -> Iterator[Account]:
        return iter(self.plain.accounts)

    def __len__(self) -> int:
        return len(self.plain.accounts)

    def json(self) -> dict[str, Any]:
        """The object that `symamp ledger --json` prints."""
        return ledger_json(self.plain)

    def __str__(self) -> str:
        page = Page()
        ledger_page(page, self.plain)
        return page.text()

    def _repr_html_(self) -> str:
        return ledger_html(self.plain)


class StageCheck:
    """Verdicts: `check["gain.dc"]` is the first about that quantity; prints as in the terminal, and in a notebook."""

    def __init__(self, plain: Check) -> None:
        self.plain = plain

    @property
    def claims(self) -> tuple[Judged, ...]:
        """The verdicts, one a claim, in listed order."""
        return self.plain.claims

    @property
    def all_hold(self) -> bool:
        """Whether every claim holds over the whole span."""
        return self.plain.all_hold

    def __getitem__(self, about: str) -> Judged:
        for judged in self.claims:
            if judged.claim.about == about:
                return judged
        known = ", ".join(judged.claim.about for judged in self.claims)
        raise KeyError(f"{about}: these claims are about {known}")

    def __iter__(self) -> Iterator[Judged]:
        return iter(self.claims)

    def __len__(self) -> int:
        return len(self.claims)

    def json(self) -> dict[str, Any]:
        """The object that `symamp check --json` prints."""
        return check_json(self.plain)

    def __str__(self) -> str:
        page = Page()
        check_page(page, self.plain)
        return page.text()

    def _repr_html_(self) -> str:
        return check_html(self.plain)


class StageFrontier:
    """Frontiers of claims, one a claim in listed order; prints as in the terminal, and in a notebook."""

    def __init__(self, stage: StageData, plain: tuple[ClaimFrontier, ...]) -> None:
        self._stage = stage
        self.claims = plain

    def __getitem__(self, about: str) -> ClaimFrontier:
        for each in self.claims:
            if each.claim.about == about:
                return each
        known = ", ".join(each.claim.about for each in self.claims)
        raise KeyError(f"{about}: these claims are about {known}")

    def __iter__(self) -> Iterator[ClaimFrontier]:
        return iter(self.claims)

    def __len__(self) -> int:
        return len(self.claims)

    def json(self) -> dict[str, Any]:
        """The object that `symamp frontier --json` prints."""
        return frontier_json(self._stage, self.claims)

    def __str__(self) -> str:
        page = Page()
        frontier_page(page, self._stage, self.claims)
        return page.text()

    def _repr_html_(self) -> str:
        return frontier_html(self._stage.title, self.claims)


class StageShortening:
    """Shortest formulas: `found["gain.dc"]` is one, `found["gain"]` a response's; prints as in the terminal."""

    def __init__(self, plain: Shortening) -> None:
        self.plain = plain

    @property
    def found(self) -> tuple[Shortest | ShortestResponse, ...]:
        """Those of the quantities, then those of whole responses."""
        return (*self.plain.found, *self.plain.responses)

    def __getitem__(self, name: str) -> Shortest | ShortestResponse:
        for found in self.found:
            if found.name == name:
                return found
        raise KeyError(f"{name}: there are {', '.join(found.name for found in self.found)}")

    def __iter__(self) -> Iterator[Shortest | ShortestResponse]:
        return iter(self.found)

    def __len__(self) -> int:
        return len(self.found)

    def json(self) -> dict[str, Any]:
        """The object that `symamp shorten --json` prints."""
        return shorten_json(self.plain)

    def __str__(self) -> str:
        page = Page()
        shorten_page(page, self.plain)
        return page.text()
