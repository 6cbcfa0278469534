"""Whether a ledger says where roots of a large response are not sure over the span."""

from __future__ import annotations

import numpy as np
import pytest

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage
from symamp.exact import pencil
from symamp.exact.derive import derive
from symamp.exact.forms import Nested
from symamp.judge.ledger import make_ledger


def ladder(sections: int) -> Stage:
    """Sections of a resistor and a capacitor, the last capacitor neglected; nested for its many terms."""
    build = StageBuilder("ladder")
    build.voltage_source("VIN", "n0", "gnd")
    for k in range(1, sections + 1):
        build.resistor(f"R{k}", f"n{k - 1}", f"n{k}", "1 kohm")
        build.capacitor(f"C{k}", f"n{k}", "gnd", "1 pF")
    build.response("transfer", source="VIN", to=f"n{sections}")
    build.span("R1", "0.5 kohm", "2 kohm")
    build.assume("no last one", neglect=[f"C{sections}"])
    return build.stage()


def test_roots_that_the_matrices_settle_draw_no_warning() -> None:
    stage = ladder(30)
    assert isinstance(derive(stage, stage.asked["transfer"]).form, Nested)
    ledger = make_ledger(stage, quantities=["transfer.p1", "transfer.p20"], points=32)
    assert ledger.warnings == ()
    # The error of p20 at an end of the side, from a dense eigenvalue problem with and without the last capacitor.
    account = ledger["transfer.p20"]
    for extreme, where in (
        (account.span.least, account.span.where_least),
        (account.span.greatest, account.span.where_greatest),
    ):
        with_it, without = dense_poles(30, where["R1"], 1e-12), dense_poles(30, where["R1"], 0.0)
        errors = [abs(without[k] / with_it[19] - 1) for k in range(len(without))]
        assert min(abs(e - abs(extreme)) for e in errors) < 1e-9


def dense_poles(sections: int, first: float, last: float) -> np.ndarray:
    """Poles by increasing magnitude: of the symmetric matrix C^(−1/2)·G·C^(−1/2), the last node out if it has none."""
    g = np.zeros((sections, sections))
    for k in range(sections):
        value = 1 / first if k == 0 else 1e-3
        g[k, k] += value
        if k:
            g[k - 1, k - 1] += value
            g[k - 1, k] -= value
            g[k, k - 1] -= value
    if not last:
        g = g[:-1, :-1] - np.outer(g[:-1, -1], g[-1, :-1]) / g[-1, -1]
    return np.sort(np.linalg.eigvalsh(g / 1e-12))


def test_roots_that_nothing_settles_draw_one(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(pencil, "SURE", 0.0)
    ledger = make_ledger(ladder(30), quantities=["transfer.p1"], points=8)
    (warning,) = ledger.warnings
    assert "uncertain over the span (at " in warning
    assert make_ledger(ladder(30), quantities=["transfer.dc"], points=8).warnings == ()
