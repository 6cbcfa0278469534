"""Polynomials of many rings in one bank: their values as those of each by itself."""

from __future__ import annotations

from fractions import Fraction
from itertools import product

import numpy as np
import pytest
from flint import Ordering, fmpz_mpoly, fmpz_mpoly_ctx
from hypothesis import given
from hypothesis import strategies as st

from symamp.judge import bank as module
from symamp.judge.bank import Bank, TermTable, poly_key

RINGS = [
    fmpz_mpoly_ctx.get(names, Ordering.lex)
    for names in (("gm1", "gds1", "CL", "s"), ("gds1", "RS", "s"), ("s",))
]
VALUES = {
    name: Fraction(n, d) for name, n, d in (("gm1", 3, 700), ("gds1", 1, 9000), ("CL", 2, 3), ("RS", 50, 1))
}


@st.composite
def polynomials(draw: st.DrawFn) -> fmpz_mpoly:
    ring = draw(st.sampled_from(RINGS))
    powers = st.tuples(*(st.integers(0, 3) for _ in range(ring.nvars() - 1)))
    terms = draw(st.dictionaries(powers, st.integers(-(10**20), 10**20), max_size=6))
    return ring.from_dict({(*power, 0): factor for power, factor in terms.items() if factor})


def by_hand(polynomial: fmpz_mpoly, values: dict[str, Fraction]) -> Fraction:
    names = polynomial.context().names()
    total = Fraction(0)
    for exponents, factor in polynomial.terms():
        worth = Fraction(int(factor))
        for name, exponent in zip(names, exponents, strict=True):
            worth *= values[name] ** int(exponent) if int(exponent) else 1
        total += worth
    return total


@given(st.lists(polynomials(), min_size=1, max_size=5))
def test_exactly_and_in_floats(given_ones: list[fmpz_mpoly]) -> None:
    table = TermTable(given_ones)
    wanted = [by_hand(p, VALUES) for p in given_ones]
    assert [Fraction(int(x.p), int(x.q)) for x in table.exact(VALUES)] == wanted
    scale = np.linspace(0.5, 2, 300)  # more points than are held at one time
    floats = {name: float(value) * (scale if name == "gds1" else 1.0) for name, value in VALUES.items()}
    found = table.at(floats, 300)
    for k in (0, 150, 299):
        point = {n: Fraction(float(v[k] if isinstance(v, np.ndarray) else v)) for n, v in floats.items()}
        for row, polynomial in zip(found, given_ones, strict=True):
            size = sum(abs(float(by_hand(t, point))) for t in terms_of(polynomial))
            assert row[k] == pytest.approx(float(by_hand(polynomial, point)), abs=1e-14 * size, rel=1e-14)


def terms_of(polynomial: fmpz_mpoly) -> list[fmpz_mpoly]:
    return [polynomial.context().from_dict({e: c}) for e, c in polynomial.terms()]


def test_equal_polynomials_of_two_rings_are_one() -> None:
    (gm, gds, _, _), (gds_too, rs, _) = RINGS[0].gens(), RINGS[1].gens()
    assert poly_key(gds + 2) == poly_key(gds_too + 2)
    assert len({poly_key(p) for p in (gm + 2, gds + 2, gds + 3, gds * gds + 2, rs + 2, gds - 2)}) == 6
    bank = Bank()
    assert [bank.place(p) for p in (gds + 2, rs + 2, gds_too + 2)] == [0, 1, 0]


def test_a_bank_gives_the_same_whichever_way_it_works(monkeypatch: pytest.MonkeyPatch) -> None:
    gm, gds, load, _ = RINGS[0].gens()
    row = [(gm + gds) ** k * load + n for k, n in product((1, 2, 3), (0, 5))]
    floats = {name: np.array([float(value), 2 * float(value)]) for name, value in VALUES.items()}
    found = []
    for limit in (0, 10**9):
        monkeypatch.setattr(module, "_MANY_TERMS", limit)
        bank = Bank()
        places = [bank.place(p) for p in row]
        found.append([bank.row(i, floats, 2) for i in places])
        assert [Fraction(int(x.p), int(x.q)) for x in (bank.exact(i, VALUES) for i in places)] == [
            by_hand(p, VALUES) for p in row
        ]
    assert np.allclose(found[0], found[1], rtol=1e-13, atol=0)
