"""Stages, and figures in full, for the tests of ledgers and checks that several workers make."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from judged import COMMON_SOURCE, NO_R2, RESONATOR, SMALL_GDS, stage_of

from symamp.circuit.stage import Stage
from symamp.judge.ledger import Ledger
from symamp.judge.verdict import Check

NO_FEEDTHROUGH = """
[[assumption]]
name = "no feedthrough"
neglect = ["cgd"]

[[assumption]]
name = "one pole"
dominant_pole = true
"""

CLAIMS = """
[[claim]]
about = "gain.dc"
formula = "-gm1*(RL || ro1)"
within = "1 %"

[[claim]]
about = "gain.p1.hz"
formula = "1/(2*pi*RS*(cgs1 + gm1*RL*cgd1))"
within = "10 %"

[[claim]]
about = "gain.bandwidth"
formula = "1/(2*pi*RS*(cgs1 + gm1*RL*cgd1))"
within = "10 %"
"""

BOX = '\n[span]\ngm1 = ["2 mS", "8 mS"]\ngds1 = "40 %"\nRL = ["1 kohm", "9 kohm"]\n'


def box_stage() -> Stage:
    """A common-source stage over a box: three assumptions, three claims."""
    return stage_of(COMMON_SOURCE, BOX, SMALL_GDS, NO_FEEDTHROUGH, CLAIMS)


def ringing_stage() -> Stage:
    """Poles that meet and part over the box, so that figures are complex here and there."""
    claim = '\n[[claim]]\nabout = "gain.p1"\nformula = "-R1/L1"\nwithin = "5 %"\n'
    return stage_of(RESONATOR, '\n[span]\nR1 = ["20 ohm", "900 ohm"]\n', NO_R2, claim)


def table_stage(folder: Path, rows: int = 301) -> Stage:
    """The same stage over the rows of a table, some of them alike."""
    lines = ["gm1 [mS],gds1 [mS],RL [kohm]"]
    lines += [f"{1 + n % 70 / 10},{0.1 + n * n % 23 / 100},{1 + n * n % 31 / 7}" for n in range(rows)]
    (folder / "corners.csv").write_text("\n".join(lines) + "\n")
    span = '\n[span]\ntable = "corners.csv"\n'
    return stage_of(COMMON_SOURCE, span, SMALL_GDS, NO_FEEDTHROUGH, CLAIMS, folder=folder)


def ledger_figures(made: Ledger) -> list[Any]:
    """All figures over the span and where they are reached."""
    return [
        made.points,
        made.seed,
        made.method,
        [
            (account.name, account.span, [share.span for share in account.assumptions])
            for account in made.accounts
        ],
    ]


def check_figures(made: Check) -> list[Any]:
    """The same of verdicts."""
    return [
        made.points,
        [(judged.verdict, judged.span, [each.span for each in judged.conditions]) for judged in made.claims],
    ]
