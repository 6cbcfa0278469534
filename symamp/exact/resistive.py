"""The same response with device conductances written as resistances: gds1 as 1/ro1, gpi1 as 1/rpi1."""

from __future__ import annotations

from dataclasses import replace
from fractions import Fraction

from flint import fmpz_mpoly

from symamp.circuit.kinds import RESISTANCE, Parameter
from symamp.circuit.stage import Stage, Symbol
from symamp.exact.forms import Expanded, expanded_of
from symamp.exact.polys import S, from_coefficients, inverted, lowest_terms, ring_of
from symamp.exact.response import Response


def in_resistances(response: Response) -> Response:
    """The response over a stage whose symbols are ro1, rpi1, … in place of gds1, go1, gpi1, …

    A nested response, which shows no formula, is returned as it is.
    """
    names = resistance_names(response.stage)
    if not isinstance(response.form, Expanded) or not names:
        return response
    stage = _resistive_stage(response.stage, names)
    first = response.first_zero
    return replace(
        response,
        stage=stage,
        form=_rewritten(response.form, stage, names),
        first_zero=_rewritten(first, stage, names) if isinstance(first, Expanded) else first,
    )


def resistance_names(stage: Stage) -> dict[str, str]:
    """{conductance: the alias that is its inverse}: {"gds1": "ro1"}."""
    return {
        next(iter(powers)): alias for alias, powers in stage.aliases.items() if list(powers.values()) == [-1]
    }


def _resistive_stage(stage: Stage, names: dict[str, str]) -> Stage:
    symbols, bias = {}, dict(stage.bias)
    for name, symbol in stage.symbols.items():
        alias = names.get(name)
        if alias is None:
            symbols[name] = symbol
            continue
        bare = "rpi" if symbol.parameter.name == "gpi" else "ro"
        symbols[alias] = Symbol(alias, symbol.part, Parameter(bare, "ohm", RESISTANCE))
        if bias.get(name):
            bias[alias] = Fraction(1) / bias[name]
    return replace(stage, symbols=symbols, bias=bias)


def _rewritten(form: Expanded, stage: Stage, names: dict[str, str]) -> Expanded:
    old = form.context.names()
    new_names = [names.get(name, name) for name in old if name != S]
    context = ring_of(stage.symbols, new_names)
    place = {name: i for i, name in enumerate(context.names())}

    def moved(polynomial: fmpz_mpoly) -> fmpz_mpoly:
        terms = {}
        for exponents, coefficient in polynomial.terms():
            new = [0] * context.nvars()
            for name, exponent in zip(old, exponents, strict=True):
                new[place[names.get(name, name)]] = int(exponent)
            terms[tuple(new)] = int(coefficient)
        return context.from_dict(terms)

    above, below = (moved(from_coefficients(row)) for row in (form.numerator, form.denominator))
    turned = {names[name] for name in old if name in names}
    return expanded_of(*lowest_terms(*inverted(above, below, turned)))
