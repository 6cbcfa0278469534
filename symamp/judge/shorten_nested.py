"""Short formulas of responses that are not written out (room: judge): struck symbols, then the largest terms."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, field

from flint import fmpz_mpoly

from symamp.assumptions.merge import pooled
from symamp.assumptions.read import Assumption
from symamp.circuit.kinds import INDUCTANCE, RESISTANCE
from symamp.circuit.stage import Stage
from symamp.errors import StageError, TooLargeError
from symamp.exact.asked_quantity import Quantity
from symamp.exact.forms import Expanded, Nested
from symamp.exact.formulas import PolyRatio
from symamp.exact.largest_reduced import Reduced, reduced_over
from symamp.exact.polys import lowest_terms
from symamp.exact.response import Response
from symamp.exact.striking import AT_DC, Quotient, Strike
from symamp.judge.sample import Sample

ONE_POLE = "one pole is dominant"
_FIRST_POLE = Quotient(("denominator", 0), ("denominator", 1))
_TIGHTER = (1.0, 0.8, 0.6)  # of the error allowed: what a sample does not see may be more


@dataclass(frozen=True)
class Struck:
    """A short ratio, what it rests on in words, what each strike changes, and how many single terms went after."""

    ratio: PolyRatio
    names: tuple[str, ...]
    changes: tuple[float, ...]
    dropped: int
    worst: float
    own: tuple[str, ...] = field(default=())

    @property
    def terms(self) -> int:
        """Terms above and below the bar."""
        return len(self.ratio[0]) + len(self.ratio[1])


def short_ratios(
    exact: Response, quantity: Quantity, matched: Sequence[Assumption], sample: Sample, within: float
) -> Iterator[Struck]:
    """Short ratios of dc or of the dominant pole p1, each tried against the sample; the likeliest first.

    `matched` are assumptions that make parts one, of the stage file or of the catalogue; formulas are sought with all
    of them, and without. Ends where none is found; raises StageError for a quantity that has no such ratio.
    """
    quotient = _quotient(quantity)
    form = exact.form
    assert isinstance(form, Nested)
    for share in _TIGHTER:
        found = []
        for made in (matched, ()) if matched else ((),):
            rename = dict(pooled(exact.stage, made).rename)
            try:
                reduced = reduced_over(
                    form,
                    exact.stage.symbols,
                    sample.values,
                    sample.points,
                    (quotient,),
                    within=share * within,
                    rename=rename or None,
                )
            except (StageError, TooLargeError):
                continue  # made one they are off by more, or too many terms are left
            if reduced.error <= within:
                found.append(_struck(exact.stage, quantity, reduced, [a.name for a in made]))
        yield from sorted(found, key=lambda each: (each.terms, each.worst))


def _quotient(quantity: Quantity) -> Quotient:
    if quantity.name == "dc":
        return AT_DC
    if quantity.name == "p" and quantity.index == 1:
        return _FIRST_POLE
    raise StageError(
        f"{quantity.text} of a response that is not written out has no short formula here",
        "dc and p1, the dominant pole, have",
    )


def _struck(stage: Stage, quantity: Quantity, reduced: Reduced, made: Sequence[str]) -> Struck:
    names = [*made, *(_words(stage, strike) for strike in reduced.strikes)]
    if quantity.name == "p":
        names.append(ONE_POLE)
    changes = [float("nan")] * len(made) + [strike.change for strike in reduced.strikes]
    changes += [float("nan")] * (len(names) - len(changes))
    ratio = _ratio(quantity, reduced.form)
    return Struck(ratio, tuple(names), tuple(changes), reduced.dropped, reduced.error)


def _ratio(quantity: Quantity, form: Expanded) -> PolyRatio:
    """dc = a0/b0, and p1 = −b0/b1 where it is dominant."""
    above: fmpz_mpoly
    above, below = (
        (form.numerator[0], form.denominator[0])
        if quantity.name == "dc"
        else (-form.denominator[0], form.denominator[1])
    )
    return lowest_terms(above, below)


def _words(stage: Stage, strike: Strike) -> str:
    """A strike as an assumption is named."""
    nature = stage.symbols[strike.symbol].nature
    if (
        nature in (RESISTANCE, INDUCTANCE)
        and not stage.parts[stage.symbols[strike.symbol].part].kind.prefixed
    ):
        return f"{strike.symbol} is {'short' if strike.limit > 0 else 'open'}"
    return f"{strike.symbol} is {'neglected' if strike.limit > 0 else 'large'}"
