"""Short formulas of responses that are not written out (room: judge): struck symbols, then the largest terms."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass

from symamp.assumptions.merge import pooled
from symamp.assumptions.read import Assumption
from symamp.circuit.kinds import CAPACITANCE, INDUCTANCE, RESISTANCE
from symamp.circuit.stage import Stage
from symamp.errors import StageError, TooLargeError
from symamp.exact.asked_quantity import Quantity
from symamp.exact.forms import Expanded, Nested
from symamp.exact.formulas import PolyRatio
from symamp.exact.largest_reduced import Reduced, reduced_over
from symamp.exact.polys import into_ring, lowest_terms, with_pi
from symamp.exact.response import Response
from symamp.exact.striking import AT_DC, Quotient, Strike
from symamp.exact.tape import polynomial_value
from symamp.judge.balance import PI
from symamp.judge.sample import Sample

ONE_POLE = "one pole is dominant"
ONE_ZERO = "one zero is dominant"
_QUOTIENTS = {
    "dc": AT_DC,
    "p1": Quotient(("denominator", 0), ("denominator", 1)),
    "z1": Quotient(("numerator", 0), ("numerator", 1)),
    "bandwidth": Quotient(("denominator", 0), ("denominator", 1)),
    "gain_bandwidth": Quotient(("numerator", 0), ("denominator", 1)),
}
_TIGHTER = (0.8, 0.6)  # of the error allowed: what a sample does not see may be more
_AROUND = (0.5, 2.0, 4.0)  # of the error allowed: for the trade-off, and now and then for something shorter
_HUGE = 10**12  # product terms above which each search takes seconds: then only some of these are made


@dataclass(frozen=True)
class Struck:
    """A short ratio, what it rests on in words, what each strike changes, and how many single terms went after.

    `made` are the names of the assumptions that made parts one, the first of `names`; `tables` are the lines of a
    stage file of the strikes that it has lines for.
    """

    ratio: PolyRatio
    names: tuple[str, ...]
    changes: tuple[float, ...]
    dropped: int
    worst: float
    made: tuple[str, ...] = ()
    tables: tuple[str, ...] = ()

    @property
    def terms(self) -> int:
        """Terms above and below the bar."""
        return len(self.ratio[0]) + len(self.ratio[1])


class Striking:
    """Short ratios of one quantity of a response, each tried against a sample.

    `matched` are assumptions that make parts one, of the stage file or of the catalogue; formulas are sought with all
    of them, and without. Raises StageError for a quantity that is no quotient of two coefficients.
    """

    def __init__(
        self, exact: Response, quantity: Quantity, matched: Sequence[Assumption], sample: Sample
    ) -> None:
        known = _QUOTIENTS.get(quantity.text)
        if known is None:
            raise StageError(
                f"{quantity.text} of a response that is not written out has no short formula here",
                f"{', '.join(_QUOTIENTS)} have",
            )
        self._exact, self._quantity, self._sample = exact, quantity, sample
        self._quotient = known
        self._ways = (tuple(matched), ()) if matched else ((),)

    def within(self, bound: float, ways: int = 2) -> list[Struck]:
        """Ratios that are off by no more than `bound` over the sample, the shortest first.

        With one way those with all parts made one alone, where there are such.
        """
        form, stage = self._exact.form, self._exact.stage
        assert isinstance(form, Nested)
        found = []
        for made in self._ways[:ways]:
            rename = dict(pooled(stage, made).rename)
            try:
                reduced = reduced_over(
                    form,
                    stage.symbols,
                    self._sample.values,
                    self._sample.points,
                    (self._quotient,),
                    within=bound,
                    rename=rename or None,
                )
            except (StageError, TooLargeError):
                continue  # made one they are off by more, or too many terms are left
            if reduced.error <= bound:
                found.append(self._struck(reduced, tuple(a.name for a in made)))
        return sorted(found, key=lambda each: (each.terms, each.worst))

    def tighter(self, bound: float) -> list[Struck]:
        """The same within less, for where the whole span has points that are worse than the sample."""
        return [each for share in _TIGHTER for each in self.within(share * bound)]

    def around(self, bound: float) -> list[Struck]:
        """The same within less and more, for the trade-off."""
        huge = self._exact.terms > _HUGE
        return [
            each
            for share in _AROUND
            if share > 1 or not huge
            for each in self.within(share * bound, 1 if huge else 2)[:1]
        ]

    def _struck(self, reduced: Reduced, made: tuple[str, ...]) -> Struck:
        stage = self._exact.stage
        names = [*made, *(_words(stage, strike) for strike in reduced.strikes)]
        if self._quantity.name != "dc":
            names.append(ONE_ZERO if self._quantity.name == "z" else ONE_POLE)
        changes = [float("nan")] * len(made) + [strike.change for strike in reduced.strikes]
        changes += [float("nan")] * (len(names) - len(changes))
        tables = (_table(stage, strike) for strike in reduced.strikes)
        return Struck(
            self._ratio(reduced.form),
            tuple(names),
            tuple(changes),
            reduced.dropped,
            reduced.error,
            made,
            tuple(table for table in tables if table),
        )

    def _ratio(self, form: Expanded) -> PolyRatio:
        """dc = a0/b0; p1 = −b0/b1 and z1 = −a0/a1 where these are dominant, and then |p1|/2π and |dc·p1|/2π."""
        above, below = (
            (form.numerator if side == "numerator" else form.denominator)[power]
            for side, power in (self._quotient.above, self._quotient.below)
        )
        if self._quantity.name in ("p", "z"):
            above = -above
        if self._quantity.name in ("bandwidth", "gain_bandwidth"):
            context = with_pi(above.context())
            pi = context.gen(context.names().index(PI))
            above, below = into_ring(above, context), 2 * pi * into_ring(below, context)
            values = {**self._exact.bias_values, PI: 1.0}
            if polynomial_value(above, values) * polynomial_value(below, values) < 0:
                above = -above
        return lowest_terms(above, below)


def _words(stage: Stage, strike: Strike) -> str:
    """A strike as an assumption is named."""
    key = _key(stage, strike)
    if key is None:
        return f"{strike.symbol} is {'neglected' if strike.limit > 0 else 'large'}"
    return f"{strike.symbol} is {'neglected' if key == 'neglect' else key}"


def _table(stage: Stage, strike: Strike) -> str:
    """The lines of a stage file, "" where it has none for this."""
    key = _key(stage, strike)
    if key is None:
        return ""
    name = json.dumps(_words(stage, strike), ensure_ascii=False)
    return f'[[assumption]]\nname = {name}\n{key} = ["{strike.symbol}"]'


def _key(stage: Stage, strike: Strike) -> str | None:
    """Which limit of a stage file it is."""
    symbol = stage.symbols[strike.symbol]
    a_part = not stage.parts[symbol.part].kind.prefixed
    to_zero = strike.limit > 0
    if a_part and symbol.nature in (RESISTANCE, INDUCTANCE):
        return "short" if to_zero else "open"
    if to_zero:
        return "neglect"
    return "short" if a_part and symbol.nature == CAPACITANCE else None
