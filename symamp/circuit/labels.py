"""Room `circuit`: the names of a stage's symbols and aliases, which labels are allowed, and selectors.

A selector is how a user names symbols: a symbol (`gds1`), an alias (`ro1`), a part (`M1`, `CL`), or the bare
name of a parameter or alias (`gds`, `ro`), which means that of every device.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from fractions import Fraction

from symamp.circuit.kinds import BARE_PARAMETERS
from symamp.circuit.near import propose
from symamp.circuit.stage import GROUND, Part, Stage, Symbol
from symamp.errors import ReadError, StageError
from symamp.formula import (
    FUNCTIONS,
    Binary,
    Dimension,
    Name,
    Node,
    Number,
    Power,
    dimension_of_unit,
    names,
    parse,
)
from symamp.values import quoted

Monomial = Mapping[str, "int | Fraction"]  # symbol -> exponent; {} is 1

QUANTITIES = (
    "dc", "hf", "bandwidth", "peak", "peak_frequency", "low_corner", "high_corner", "unity_gain_frequency",
    "gain_bandwidth", "phase_margin", "gain_margin", "at",
)  # fmt: skip
_INDEXED_QUANTITY = re.compile(r"[pzab][0-9]+")
_RESERVED = {"s", "j", "pi", "table", GROUND, *FUNCTIONS, *QUANTITIES}
_LABEL = re.compile(r"[A-Za-z][A-Za-z0-9_]*")


@dataclass(frozen=True)
class Selection:
    """What a selector means: the symbols that it names or is made of, and the same as products of symbols.

    `monomials` of an alias holds its exponents ({"gds1": -1} for ro1). `remark` says so where a known
    parameter is one that no device has; the selection is empty then.
    """

    text: str
    symbols: tuple[str, ...] = ()
    monomials: tuple[Monomial, ...] = ()
    remark: str = ""


def symbols_of(parts: Iterable[Part]) -> dict[str, Symbol]:
    """The symbols of the parts, in the order of the parts and of each kind's parameters."""
    found = {}
    for part in parts:
        for parameter in part.kind.parameters:
            if parameter.name in part.parameters:
                name = part.symbol(parameter.name)
                found[name] = Symbol(name, part.label, parameter)
    return found


def alias_table(parts: Iterable[Part]) -> dict[str, dict[str, int]]:
    """The aliases of the devices: `ro1` -> {"gds1": -1}. One exists where all that it is made of does."""
    found = {}
    for part in parts:
        for alias, powers in part.kind.aliases.items():
            if all(parameter in part.parameters for parameter in powers):
                found[part.symbol(alias)] = {part.symbol(name): power for name, power in powers.items()}
    return found


def unit_of(stage: Stage, name: str) -> str:
    """The unit of a symbol or an alias ("ohm" for ro1, "" for beta1). KeyError for any other name."""
    if name in stage.symbols:
        return stage.symbols[name].unit
    return product_unit(stage.aliases[name], {name: symbol.unit for name, symbol in stage.symbols.items()})


def product_unit(powers: Monomial, units: Mapping[str, str]) -> str:
    """The unit of a product of powers whose factors have these units."""
    product = Dimension()
    for name, power in powers.items():
        product = product.times(dimension_of_unit(units[name]).to(Fraction(power)))
    return product.unit


def free_label(label: str, taken: Iterable[str], suffixes: Iterable[str] = ()) -> str:
    """A label of the same letter with the lowest number from 2 that no label and no device's suffix has."""
    taken, suffixes = set(taken), set(suffixes)
    letter = label[0].upper() if _LABEL.fullmatch(label[:1]) else "X"
    number = 2
    while f"{letter}{number}" in taken or str(number) in suffixes:
        number += 1
    return f"{letter}{number}"


def check_label(label: str, taken: Iterable[str] = ()) -> None:
    """Refuse a label that cannot be one, whatever the other parts are. Raises StageError with another one."""
    if not _LABEL.fullmatch(label):
        remedy = "a label is a letter, then letters, digits and underscores, such as M1"
        raise StageError(f"{quoted(label)} is no label", remedy)
    other = f"another label would do, such as {free_label(label, taken)}"
    if len(label) == 1:
        raise StageError(f"a label of one letter, {label}, leaves no name for symbols", other)
    if label in BARE_PARAMETERS:
        raise StageError(f"{label} is the bare name of a device parameter and no label", other)
    if label in _RESERVED or _INDEXED_QUANTITY.fullmatch(label):
        raise StageError(f"{label} has a meaning of its own and is no label", other)


def check_devices(parts: Sequence[Part]) -> None:
    """Refuse two devices whose labels differ in the first letter alone: every device has a gm, so they clash.

    Raises StageError whose key is that of the later part.
    """
    seen: dict[str, Part] = {}
    devices = [part for part in parts if part.kind.prefixed]
    for part in devices:
        first = seen.setdefault(part.label[1:], part)
        if first is not part:
            other = free_label(part.label, (p.label for p in parts), (p.label[1:] for p in devices))
            raise StageError(
                f"{first.label} and {part.label} both give the symbol {part.symbol('gm')}",
                f"call {part.label} {other}, for example",
                key=f"{part.kind.name}.{part.label}",
            )


def check_symbols(parts: Mapping[str, Part]) -> None:
    """Refuse a label that is a symbol or an alias of a device. Raises StageError, its key the part."""
    named: dict[str, str] = {}
    for part in parts.values():
        if part.kind.prefixed:
            own = (*symbols_of([part]), *alias_table([part]))
            named.update(dict.fromkeys(own, part.label))
    for part in parts.values():
        if part.label in named:
            what = f"{part.label} is also a symbol of {named[part.label]}"
            other = free_label(part.label, parts, (p.label[1:] for p in parts.values() if p.kind.prefixed))
            raise StageError(
                what, f"another label would do, such as {other}", key=f"{part.kind.name}.{part.label}"
            )


def select(stage: Stage, text: str) -> Selection:
    """What one selector means here. Raises ReadError for an unknown name, with the nearest known one."""
    if not isinstance(text, str):
        raise ReadError(f"{quoted(text)} names no symbol", 'write a name as text, such as "gds1"')
    name = text.strip()
    if name in stage.symbols:
        return Selection(text, (name,), ({name: 1},))
    if name in stage.aliases:
        powers = stage.aliases[name]
        return Selection(text, tuple(powers), (dict(powers),))
    if name in stage.parts:
        return _of_part(text, stage.parts[name])
    if name in BARE_PARAMETERS:
        return _of_every_device(stage, text, name)
    raise unknown_symbol(stage, name)


def select_symbols(stage: Stage, text: str) -> tuple[str, ...]:
    """The symbols that a selector names; an alias of one symbol names that symbol (ro is gds).

    Empty for a known parameter that no device has (`select` gives the remark). Raises ReadError for unknown
    names and for an alias made of several symbols, such as beta.
    """
    selection = select(stage, text)
    for monomial in selection.monomials:
        if len(monomial) > 1:
            made = " and ".join(monomial)
            raise ReadError(f"{quoted(text)} is made of {made} and is no single symbol", f"name {made}")
    return selection.symbols


def select_monomials(stage: Stage, text: str) -> tuple[Monomial, ...]:
    """The products of symbols that a selector, or a product, quotient or power of selectors, means.

    "gm1*RS", "ro1", "1", "gm*ro". Bare names in a product go device by device: one product for each device
    that has all of them, none (see `product_remark`) where no device has. Raises ReadError.
    """
    if isinstance(text, str) and (text.strip() in stage.parts or text.strip() in BARE_PARAMETERS):
        return select(stage, text).monomials
    if isinstance(text, int) and not isinstance(text, bool):
        text = str(text)
    exponents = _exponents(text, parse(text))
    selections = {name: select(stage, name) for name in exponents}
    bare = [name for name in exponents if _is_bare(stage, name)]
    fixed: dict[str, int | Fraction] = {}
    for name, power in exponents.items():
        if name not in bare:
            _multiply(fixed, _single(selections[name]), power)
    if not bare:
        return (_cleaned(fixed),)
    return tuple(_device_product(part, bare, exponents, fixed) for part in _devices_with(stage, bare))


def remark_of(stage: Stage, text: str) -> str:
    """Why a selector or a product of them names nothing; "" where it names something. Raises ReadError."""
    if select_monomials(stage, text):
        return ""
    bare = [name for name in names(parse(text)) if _is_bare(stage, name)]
    return f"no device of this stage has {' and '.join(bare)}: {text.strip()} has no effect"


def known_names(stage: Stage) -> list[str]:
    """All that a selector may be on this stage."""
    labels = (part.label for part in stage.parts.values() if part.parameters)
    return list(dict.fromkeys((*stage.symbols, *stage.aliases, *labels, *BARE_PARAMETERS)))


def unknown_symbol(stage: Stage, name: str, *, selectors: bool = True) -> ReadError:
    """The error about a name that no symbol has: the parameter that a device lacks, or the nearest name.

    Without `selectors` only symbols and aliases are proposed, as where a bare name or a part has no place.
    """
    for part in stage.parts.values() if name.isidentifier() else ():
        bare = name.removesuffix(part.symbol(""))
        if (
            part.kind.prefixed
            and part.symbol(bare) == name
            and part.kind.name in BARE_PARAMETERS.get(bare, ())
        ):
            return ReadError(
                f"{part.label} has no {bare}, because its bias gives none",
                f"add {bare} to the bias of {part.label}, or name one of {', '.join(symbols_of([part]))}",
            )
    known = known_names(stage) if selectors else [*stage.symbols, *stage.aliases]
    if any(character.isdigit() or character == "_" for character in name):  # meant as one device's own
        known = [other for other in known if other not in BARE_PARAMETERS] or known
    return ReadError(f"{quoted(name)} names no symbol", propose(name, known, "symbols"))


def _of_part(text: str, part: Part) -> Selection:
    symbols = tuple(symbols_of([part]))
    if not symbols:
        what = part.kind.name.replace("_", " ")
        raise ReadError(
            f"{part.label} is a part ({what}) without small-signal parameters", "name another part"
        )
    return Selection(text, symbols, tuple({symbol: 1} for symbol in symbols))


def _of_every_device(stage: Stage, text: str, name: str) -> Selection:
    monomials = tuple(powers for part in stage.parts.values() if (powers := owned(part, name)))
    symbols = tuple(dict.fromkeys(symbol for powers in monomials for symbol in powers))
    remark = "" if monomials else f"no device of this stage has {name}: it has no effect"
    return Selection(text, symbols, monomials, remark)


def owned(part: Part, name: str) -> dict[str, int] | None:
    """What a bare parameter or alias is on one device, or None where the device does not have it."""
    if not part.kind.prefixed:
        return None
    powers = {name: 1} if name in part.parameters else part.kind.aliases.get(name)
    if powers is None or not all(parameter in part.parameters for parameter in powers):
        return None
    return {part.symbol(parameter): power for parameter, power in powers.items()}


def _is_bare(stage: Stage, name: str) -> bool:
    own = name in stage.symbols or name in stage.aliases or name in stage.parts
    return not own and name in BARE_PARAMETERS


def _devices_with(stage: Stage, bare: list[str]) -> list[Part]:
    return [part for part in stage.parts.values() if all(owned(part, name) is not None for name in bare)]


def _device_product(
    part: Part,
    bare: list[str],
    exponents: Mapping[str, int | Fraction],
    fixed: Mapping[str, int | Fraction],
) -> Monomial:
    product = dict(fixed)
    for name in bare:
        _multiply(product, owned(part, name) or {}, exponents[name])
    return _cleaned(product)


def _single(selection: Selection) -> Monomial:
    if len(selection.monomials) != 1:
        raise ReadError(
            f"{quoted(selection.text)} names several symbols and cannot stand in a product",
            f"name one, such as {selection.symbols[0]}",
        )
    return selection.monomials[0]


def _multiply(product: dict[str, int | Fraction], factor: Monomial, power: int | Fraction) -> None:
    for symbol, exponent in factor.items():
        product[symbol] = product.get(symbol, 0) + exponent * power


def _cleaned(product: Mapping[str, int | Fraction]) -> Monomial:
    """Without zero exponents, and with whole ones as int."""
    return {
        symbol: int(power) if Fraction(power).denominator == 1 else power
        for symbol, power in product.items()
        if power
    }


def _exponents(text: str, node: Node) -> dict[str, int | Fraction]:
    """The exponent of each name in a product of names; numbers other than 1 have no place in it."""
    found: dict[str, int | Fraction] = {}
    waiting: list[tuple[Node, Fraction]] = [(node, Fraction(1))]
    while waiting:
        step, power = waiting.pop()
        if isinstance(step, Name):
            found[step.text] = found.get(step.text, 0) + power
        elif isinstance(step, Power):
            waiting.append((step.base, power * step.exponent))
        elif isinstance(step, Binary) and step.op in "*/":
            waiting += [(step.b, power if step.op == "*" else -power), (step.a, power)]
        elif not (isinstance(step, Number) and step.value == 1 and not step.unit):
            raise ReadError(
                f"{quoted(text)} is no product of symbols",
                'products, quotients and powers of names have a meaning here, and 1, such as "gm1*RS"',
            )
    return found
