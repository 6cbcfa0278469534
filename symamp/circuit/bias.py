"""Room `circuit`: the bias of a stage file, and the parameters that devices have because of it."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, replace
from fractions import Fraction
from typing import Any

from symamp.circuit.kinds import Kind, Parameter
from symamp.circuit.labels import product_unit
from symamp.circuit.near import propose
from symamp.circuit.place import Path, Place
from symamp.circuit.stage import Part
from symamp.errors import ReadError
from symamp.values import quoted, read_value, show_value

Values = dict[str, Fraction]  # by bare parameter name


@dataclass(frozen=True)
class Solved:
    """An alias solved for one of the names it is made of: target = alias**exponent · Π times."""

    target: str
    exponent: int
    times: Mapping[str, int] = field(default_factory=dict)

    def value(self, alias: Fraction, values: Mapping[str, Fraction]) -> Fraction:
        """The target's value; `values` holds those of `times`."""
        product = alias**self.exponent
        for name, power in self.times.items():
            product *= values[name] ** power
        return product


def solve(powers: Mapping[str, int]) -> Solved:
    """An alias, given as powers of names, solved for the last of them, whose power is 1 or −1.

    ro = gds**−1 gives gds = ro**−1; beta = gm·gpi**−1 gives gpi = beta**−1·gm.
    """
    *others, target = powers
    exponent = powers[target]
    return Solved(target, exponent, {name: -exponent * powers[name] for name in others})


def alias_unit(kind: Kind, alias: str) -> str:
    """The unit of an alias of a kind: "ohm" for ro, "" for beta."""
    return product_unit(kind.aliases[alias], {p.name: p.unit for p in kind.parameters})


def check_sign(parameter: Parameter, value: Fraction, name: str) -> None:
    """Refuse a value that the parameter cannot have. Raises ReadError."""
    if value == 0 and not parameter.may_be_zero:
        raise ReadError(f"{name} is 0, and must be positive", "give a positive value, or leave it out")
    if value < 0 and not parameter.may_be_negative:
        shown = show_value(float(value), parameter.unit)
        raise ReadError(f"{name} is negative ({shown}), and must be positive", "give a positive value")


def potential(parts: Mapping[str, Part]) -> dict[str, tuple[Part, str]]:
    """Every name that a device's parameters and aliases could have, with the device and the bare name."""
    return {
        part.symbol(name): (part, name)
        for part in parts.values()
        if part.kind.prefixed
        for name in (*(parameter.name for parameter in part.kind.parameters), *part.kind.aliases)
    }


def read_bias(data: Mapping[str, Any], parts: Mapping[str, Part], place: Place) -> dict[str, Values]:
    """The values that the bias gives, by part and bare parameter name; aliases are worked out.

    `data` is the stage file's top table; a stage without [bias] gives {}. Raises StageError or ReadError,
    with their place, for unknown names, wrong values and parameters that are given twice.
    """
    table = data.get("bias", {})
    if not isinstance(table, dict):
        raise place.error(("bias",), "bias is no section", "write it as [bias] with values below")
    reader = _Reader(parts, place)
    for name, raw in table.items():
        reader.read(name, raw)
    return reader.solved()


def with_parameters(parts: Mapping[str, Part], given: Mapping[str, Iterable[str]]) -> dict[str, Part]:
    """The parts with the parameters that `given` names for each device, else with their kind's own.

    Where none is given a MOSFET whose body is not its source has gmb beside its kind's.
    """
    found = {}
    for label, part in parts.items():
        if part.kind.prefixed:
            names = set(given[label]) if label in given else set(_default(part))
            ordered = tuple(parameter.name for parameter in part.kind.parameters if parameter.name in names)
            part = replace(part, parameters=ordered)
        found[label] = part
    return found


def body_warnings(parts: Mapping[str, Part]) -> list[str]:
    """A warning for each MOSFET whose body is not its source and which has no gmb."""
    return [
        f"{part.label}: its body ({_node(part, 'body')}) is not its source ({_node(part, 'source')}) and the "
        f"bias has no gmb, so the body effect is left out; gmb = 0 says that this is meant"
        for part in parts.values()
        if _has_body_effect(part) and "gmb" not in part.parameters
    ]


class _Reader:
    """Collects what the bias says of each part, with where it says so."""

    def __init__(self, parts: Mapping[str, Part], place: Place) -> None:
        self.parts, self.place = parts, place
        self.potential = potential(parts)
        self.values: dict[str, dict[str, tuple[Fraction, Path]]] = {}

    def read(self, name: str, raw: object) -> None:
        path: Path = ("bias", name)
        part = self.parts.get(name)
        if part is None:
            self.read_symbol(name, raw, path)
        elif part.kind.prefixed:
            self.read_device(part, raw, path)
        elif not part.parameters:
            what = part.kind.name.replace("_", " ")
            raise self.place.error(path, f"{name} is a part ({what}) without a value", "leave it out")
        else:
            parameter = part.kind.parameter(part.parameters[0])
            self.keep(part, parameter.name, self.value(parameter, raw, name, path), path)

    def read_device(self, part: Part, raw: object, path: Path) -> None:
        if not isinstance(raw, dict) or not raw:
            example = '{ gm = "4 mS", gds = "0.2 mS" }' if part.kind.name == "mosfet" else '{ gm = "40 mS" }'
            raise self.place.error(path, f"{part.label} takes its parameters by name", f"write {example}")
        for name, value in raw.items():
            self.read_parameter(part, name, value, (*path, name))

    def read_symbol(self, name: str, raw: object, path: Path) -> None:
        if name not in self.potential:
            known = (*(part.label for part in self.parts.values() if _valued(part)), *self.potential)
            raise self.place.error(path, f"{quoted(name)} names no symbol", propose(name, known, "symbols"))
        self.read_parameter(*self.potential[name], raw, path)

    def read_parameter(self, part: Part, name: str, raw: object, path: Path) -> None:
        kind = part.kind
        if name in kind.aliases:
            with self.place.at(path):
                value = read_value(raw, alias_unit(kind, name))  # type: ignore[arg-type]
                if value <= 0:
                    raise ReadError(f"{part.symbol(name)} is not positive", "give a positive value")
            self.keep(part, name, value, path)
            return
        known = [parameter.name for parameter in kind.parameters]
        if name not in known:
            proposal = propose(name, (*known, *kind.aliases), "parameters")
            raise self.place.error(path, f"a {kind.name} has no parameter {quoted(name)}", proposal)
        parameter = kind.parameter(name)
        self.keep(part, name, self.value(parameter, raw, part.symbol(name), path), path)

    def value(self, parameter: Parameter, raw: object, name: str, path: Path) -> Fraction:
        with self.place.at(path):
            value = read_value(raw, parameter.unit)  # type: ignore[arg-type]
            check_sign(parameter, value, name)
        return value

    def keep(self, part: Part, name: str, value: Fraction, path: Path) -> None:
        known = self.values.setdefault(part.label, {})
        if name in known:
            raise self.place.error(path, f"{part.symbol(name)} is given twice", "give it once")
        known[name] = (value, path)

    def solved(self) -> dict[str, Values]:
        return {label: self.solve_part(self.parts[label], known) for label, known in self.values.items()}

    def solve_part(self, part: Part, known: Mapping[str, tuple[Fraction, Path]]) -> Values:
        """The parameters of one part, its aliases worked out; the simple ones first."""
        values = {name: value for name, (value, _) in known.items() if name not in part.kind.aliases}
        origin = {name: name for name in values}
        aliases = [name for name in known if name in part.kind.aliases]
        for name in sorted(aliases, key=lambda alias: len(part.kind.aliases[alias])):
            alias, path = known[name]
            solved = solve(part.kind.aliases[name])
            if solved.target in values:
                problem = (
                    f"{part.label} has both {origin[solved.target]} and {name}, which set {solved.target}"
                )
                raise self.place.error(path, problem, "give one of the two")
            missing = [other for other in solved.times if other not in values]
            if missing:
                problem = f"{name} of {part.label} needs its {' and '.join(missing)} beside it"
                raise self.place.error(path, problem, f"give {' and '.join(missing)} too, or {solved.target}")
            values[solved.target] = solved.value(alias, values)
            origin[solved.target] = name
        return values


def _default(part: Part) -> tuple[str, ...]:
    return (*part.kind.default_parameters, "gmb") if _has_body_effect(part) else part.kind.default_parameters


def _has_body_effect(part: Part) -> bool:
    return "body" in part.kind.terminals and _node(part, "body") != _node(part, "source")


def _node(part: Part, terminal: str) -> str:
    return part.nodes[part.kind.terminals.index(terminal)]


def _valued(part: Part) -> bool:
    return part.kind.prefixed or bool(part.parameters)
