"""A bias point that reads as one writes it (room: testing)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from fractions import Fraction
from math import isnan, nan, prod

from symamp.circuit.stage import Stage
from symamp.values import read_value, show_value, write_value

_SHOWN = 4  # digits


class BiasPoint(dict[str, float]):
    """A value in SI units for each symbol of a stage. It prints as `gm1 = 4.1 mS, gds1 = 0.2 mS`.

    It is a mapping, so it can be passed wherever bias values are taken:

        stage.response("gain").at("10 MHz", bias=point)

    `stage` is the stage whose symbols these are. Values that are derived (gds1 of a drawn ro1) print with four
    digits; `stage_file_lines` has them in full.
    """

    def __init__(self, stage: Stage, values: Mapping[str, float]) -> None:
        super().__init__((name, float(values[name])) for name in stage.symbols if name in values)
        self.stage = stage

    def __reduce__(self) -> tuple[type[BiasPoint], tuple[Stage, dict[str, float]]]:
        return BiasPoint, (self.stage, dict(self))

    def __repr__(self) -> str:
        return ", ".join(f"{name} = {self._shown(name)}" for name in self) or "no symbols"

    def _shown(self, name: str) -> str:
        return show_value(self[name], self.stage.symbols[name].unit, _SHOWN)

    @property
    def changed(self) -> tuple[str, ...]:
        """The symbols whose value is another than the stage's bias gives, or that have none there."""
        bias = self.stage.bias
        return tuple(n for n, value in self.items() if n not in bias or value != float(bias[n]))

    @property
    def words(self) -> str:
        """Where this is, seen from the stage's bias: "the bias point but for gm1 = 8.2 mS (4.1 mS)"."""
        if not self.stage.bias:
            return repr(self)
        changed = [self._changed(name) for name in self.changed]
        return "the bias point" + (f" but for {', '.join(changed)}" if changed else "")

    def _changed(self, name: str) -> str:
        """A changed symbol; one that the span sets by an alias (ro1, beta1) by that alias."""
        alias = next((side for side in self.stage.span.sides if side.symbol == name != side.name), None)
        shown, unit = (name, self.stage.symbols[name].unit) if alias is None else (alias.name, alias.unit)
        powers = {name: 1} if alias is None else self.stage.aliases[alias.name]
        now, before = (
            prod(float(values[n]) ** power for n, power in powers.items())
            if all(n in values for n in powers)
            else nan
            for values in (self, self.stage.bias)
        )
        was = "" if isnan(before) else f" (the stage file has {show_value(before, unit, _SHOWN)})"
        return f"{shown} = {show_value(now, unit, _SHOWN)}{was}"

    def exact(self) -> dict[str, Fraction]:
        """The values as the decimals that they print as in full."""
        return {name: read_value(value, "") for name, value in self.items()}

    def stage_file_lines(self) -> tuple[str, ...]:
        """The lines of a `[bias]` section that says this bias point, to be pasted into a stage file."""
        return tuple(self._lines())

    def _lines(self) -> Iterator[str]:
        values = self.exact()
        for part in self.stage.parts.values():
            given = {p: values[part.symbol(p)] for p in part.parameters if part.symbol(p) in values}
            written = {p: f'"{write_value(x, part.kind.parameter(p).unit)}"' for p, x in given.items()}
            if not written:
                continue
            if part.kind.prefixed:
                yield f"{part.label} = {{ {', '.join(f'{p} = {text}' for p, text in written.items())} }}"
            else:
                yield f"{part.label} = {next(iter(written.values()))}"
