"""What a set of assumptions asks of symbols: which are one, which are replaced, and where they go."""

from __future__ import annotations

from collections.abc import Callable, Hashable, Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from functools import cached_property

from symamp.assumptions.record import Assumption, Miller, Pair
from symamp.circuit.stage import Stage
from symamp.errors import StageError
from symamp.formula import Name, Node, names


@dataclass(frozen=True)
class Pooled:
    """A set of assumptions as one: nothing here depends on the order in which they were listed.

    `rename` maps a symbol to the one that stands for it; `replace` maps a symbol to its formula, each before
    those whose targets it holds; `orders` are limits of symbols after renaming.
    """

    rename: Mapping[str, str] = field(default_factory=dict)
    replace: Mapping[str, Node] = field(default_factory=dict)
    orders: Mapping[str, int] = field(default_factory=dict)
    miller: tuple[Miller, ...] = ()
    pairs: tuple[Pair, ...] = ()
    dominant_pole: bool = False
    poles_far_apart: bool = False
    band: Fraction | None = None
    remarks: tuple[str, ...] = ()

    @cached_property
    def key(self) -> Hashable:
        """What steps 1 and 2 depend on."""
        parts = (self.rename, self.replace, self.orders)
        return tuple(tuple(sorted(part.items(), key=lambda item: item[0])) for part in parts)


def pooled(stage: Stage, assumptions: Iterable[Assumption]) -> Pooled:
    """Pool a set; raises StageError where two of them contradict one another in steps 1 to 3."""
    listed = sorted(assumptions, key=lambda a: a.name)
    rename = _renaming(stage, [group for a in listed for group in a.equal])
    replace: dict[str, Node] = {}
    orders: dict[str, int] = {}
    told = Told()
    for assumption in listed:
        for symbol, node in assumption.replace.items():
            name = rename.get(symbol, symbol)
            if isinstance(node, Name) and rename.get(node.text, node.text) == name:
                continue  # what equal parts say already
            told.once("set", name, node, assumption.name)
            replace[name] = node
        for name, order in assumption.orders.items():
            told.once("limit", rename.get(name, name), order, assumption.name)
            orders[rename.get(name, name)] = order
        for bridge in assumption.miller:
            told.once("miller", bridge.symbol, bridge, assumption.name)
    return Pooled(
        rename,
        {name: replace[name] for name in _in_order(replace, rename, stage)},
        orders,
        tuple(dict.fromkeys(m for a in listed for m in a.miller)),
        tuple(_renamed_pair(pair, rename) for a in listed for pair in a.pairs),
        any(a.dominant_pole for a in listed),
        any(a.poles_far_apart for a in listed),
        next((a.band for a in listed if a.band is not None), None),
        tuple(dict.fromkeys([*(r for a in listed for r in a.remarks), *_formula_words(replace, orders)])),
    )


def trimmed(ask: Pooled, stage: Stage, held: Iterable[str]) -> Pooled:
    """What of steps 1 and 2 concerns a polynomial that holds these symbols; the rest cannot change it."""
    met = set(held)
    present = {ask.rename.get(name, name) for name in met}
    replace: dict[str, Node] = {}
    for name, node in ask.replace.items():
        if name in present:
            replace[name] = node
            used = raw_symbols(stage, node)
            met.update(used)
            present.discard(name)
            present.update(ask.rename.get(n, n) for n in used)
    return Pooled(
        {name: ask.rename[name] for name in sorted(met) if name in ask.rename},
        replace,
        {name: order for name, order in sorted(ask.orders.items()) if name in present},
    )


def _formula_words(replace: Mapping[str, Node], orders: Mapping[str, int]) -> list[str]:
    return [f"{name} has a formula, and goes where that goes" for name in sorted(replace) if name in orders]


_CLASH: dict[str, Callable[[str], str]] = {
    "set": lambda name: f"they set {name} to two formulas",
    "limit": lambda name: f"one takes {name} to zero, the other to infinity",
    "miller": lambda name: f"both split {name}, in two ways",
}


class Contradiction(StageError):
    """Assumptions that cannot stand together; `assumptions` are their names."""

    assumptions: tuple[str, ...] = ()


def contradiction(found: Iterable[str], why: str, remedy: str) -> Contradiction:
    """The error that names the assumptions; one name alone contradicts itself."""
    listed = tuple(dict.fromkeys(found))
    quoted = " and ".join(repr(name) for name in listed)
    subject = (
        f"the assumptions {quoted} contradict one another"
        if len(listed) > 1
        else (f"the assumption {quoted} contradicts itself")
    )
    error = Contradiction(f"{subject}: {why}", remedy, key="assumption")
    error.assumptions = listed
    return error


class Told:
    """What has been said of each thing so far, and by which assumption."""

    def __init__(self) -> None:
        self._said: dict[tuple[str, str], tuple[object, str]] = {}

    def once(self, about: str, name: str, value: object, assumption: str) -> None:
        """Take down what an assumption says; Contradiction where another has said otherwise."""
        before = self._said.setdefault((about, name), (value, assumption))
        if before[0] != value:
            remedy = "keep one of them, or limit each to its responses with for = [...]"
            raise contradiction((before[1], assumption), _CLASH[about](name), remedy)


def _renaming(stage: Stage, groups: Sequence[tuple[str, ...]]) -> dict[str, str]:
    """{symbol: the symbol that stands for it}; overlapping lists merge, the first part in the file leads."""
    place = {label: i for i, label in enumerate(stage.parts)}
    leader: dict[str, str] = {}

    def lead(label: str) -> str:
        while leader.get(label, label) != label:
            label = leader[label]
        return label

    for group in groups:
        first, *others = sorted({lead(label) for label in group}, key=place.__getitem__)
        for other in others:
            leader[other] = first
    rename: dict[str, str] = {}
    stands: dict[tuple[str, str], str] = {}
    for label in sorted(leader, key=place.__getitem__):
        part, top = stage.parts[label], stage.parts[lead(label)]
        for parameter in part.parameters:
            symbol = part.symbol(parameter)
            # A parameter that the leader lacks stays: the first follower that has it stands for the others.
            own = top.symbol(parameter) if parameter in top.parameters else symbol
            target = stands.setdefault((top.label, parameter), own)
            if target != symbol:
                rename[symbol] = target
    return rename


def _renamed_pair(pair: Pair, rename: Mapping[str, str]) -> Pair:
    if rename.keys().isdisjoint(pair.difference):
        return pair
    return Pair(_moved(pair.small, rename), _moved(pair.against, rename), pair.assumption)


def _moved(powers: Mapping[str, Fraction], rename: Mapping[str, str]) -> dict[str, Fraction]:
    moved: dict[str, Fraction] = {}
    for name, power in powers.items():
        new = rename.get(name, name)
        moved[new] = moved.get(new, Fraction(0)) + power
    return moved


def _in_order(replace: Mapping[str, Node], rename: Mapping[str, str], stage: Stage) -> list[str]:
    """Targets in such an order that each formula's own targets come after it; a ring is an error."""
    order: list[str] = []
    visiting: list[str] = []

    def visit(name: str) -> None:
        if name in order:
            return
        if name in visiting:
            ring = " → ".join((*visiting[visiting.index(name) :], name))
            raise StageError(f"set formulas run in a ring: {ring}", "break it at one of them", key="set")
        visiting.append(name)
        for used in base_symbols(stage, replace[name], rename):
            if used in replace:
                visit(used)
        visiting.pop()
        order.append(name)

    for name in sorted(replace):
        visit(name)
    return order[::-1]


def raw_symbols(stage: Stage, node: Node) -> list[str]:
    """The symbols that a formula holds, aliases resolved."""
    found: list[str] = []
    for name in names(node):
        found.extend(stage.aliases.get(name, (name,)))
    return found


def base_symbols(stage: Stage, node: Node, rename: Mapping[str, str]) -> list[str]:
    """The symbols that a formula holds, aliases resolved and symbols renamed."""
    return [rename.get(name, name) for name in raw_symbols(stage, node)]
