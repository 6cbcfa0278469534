"""Stage files as pytest's test files, their claims as its tests (room: testing)."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator
from functools import cached_property
from pathlib import Path
from typing import Any

import pytest

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import ENDING, locate, read_stage
from symamp.errors import SymampError
from symamp.judge.check import make_check
from symamp.judge.claim import Claim
from symamp.judge.claim_reading import read_claims
from symamp.judge.verdict import FAILS, HOLDS, HOLDS_HERE, WRONG, Check
from symamp.show.check_text import within_words
from symamp.testing.verdict_text import verdict_text

# The first line of a failure, which pytest repeats in its summary behind the claim.
_IN_SHORT = {
    HOLDS_HERE: "holds at the bias point, and not over the span",
    FAILS: "does not hold at the bias point",
    WRONG: "is no limit of the exact expression",
}


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> StageFile | None:
    """Stage files, wherever pytest looks for tests."""
    return StageFile.from_parent(parent, path=file_path) if file_path.name.endswith(ENDING) else None


class StageFile(pytest.File):
    """A stage file; its claims are judged together, when the first of them runs."""

    def collect(self) -> Iterator[StageClaim]:
        """One test for each claim. Raises CollectError, shown as its message alone, for a file that means nothing."""
        try:
            claims = read_claims(self.stage)
        except SymampError as error:
            raise self.CollectError(str(error)) from None
        for index, name in enumerate(item_names(claims)):
            yield StageClaim.from_parent(self, name=name, index=index, claim=claims[index])

    @cached_property
    def stage(self) -> Stage:
        """The stage. Raises InputError, with its place, where the file means nothing."""
        return read_stage(self.path)

    def judged(self, item: StageClaim) -> tuple[Check, int]:
        """The check in which a claim was judged, and its place there."""
        if isinstance(self._check, Check):
            return self._check, item.index
        # One of the claims cannot be judged: each by itself, so that only that one fails by it.
        return make_check(self.stage, claims=[item.claim]), 0

    @cached_property
    def _check(self) -> Check | SymampError:
        try:
            return make_check(self.stage)
        except SymampError as error:
            return error


class StageClaim(pytest.Item):
    """A claim as a test: it passes where the claim holds over the whole span."""

    def __init__(self, *, index: int, claim: Claim, **arguments: Any) -> None:
        super().__init__(**arguments)
        self.index = index
        self.claim = claim
        self.add_marker("stage_claim")

    @property
    def file(self) -> StageFile:
        """The stage file that it stands in."""
        assert isinstance(self.parent, StageFile)
        return self.parent

    def runtest(self) -> None:
        """Judge the claim. Raises ClaimFailed with the verdict, the error and the tacit conditions."""
        check, place = self.file.judged(self)
        judged = check.claims[place]
        self.user_properties.append(("verdict", judged.verdict))
        text = verdict_text(check, judged)
        if judged.verdict != HOLDS:
            raise ClaimFailed(f"{_IN_SHORT[judged.verdict]}\n{text}")
        self.add_report_section("call", "verdict", text)

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """The verdict, or the mistake in the file, as text and without a traceback."""
        if isinstance(excinfo.value, ClaimFailed | SymampError):
            return str(excinfo.value)
        return super().repr_failure(excinfo, style)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """The stage file, the line of the claim from 0, and what stands above a failure."""
        line = locate(self.file.stage, ("claim", self.index))["line"]
        # With the title before it, since pytest takes the dots of a name that ends its test's id for a module's.
        return self.path, None if line is None else line - 1, f"{self.file.stage.title}: {self.name}"


class ClaimFailed(Exception):
    """A claim that does not hold; its text is the verdict."""


def item_names(claims: tuple[Claim, ...]) -> list[str]:
    """Names such as "gain.dc = -gm1*ro1", each once: with what it is allowed, and a number, where two are alike."""
    plain = [" ".join(f"{claim.about} = {claim.formula}".split()) for claim in claims]
    counts = Counter(plain)
    longer = [
        name if counts[name] == 1 else f"{name} within {within_words(claim)}"
        for name, claim in zip(plain, claims, strict=True)
    ]
    found: list[str] = []
    for name in longer:
        number = 2
        unique = name
        while unique in found:
            unique, number = f"{name} ({number})", number + 1
        found.append(unique)
    return found
