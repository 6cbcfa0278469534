"""Room `circuit`: whether a network has one solution at all, judged by its structure.

What is refused here is singular whatever the values are: a row or a column of the nodal matrix, or a sum of
some, is zero. Each of the four looks finds one such sum:

- constraints in a loop: rows that fix only node voltages (independent sources, ammeters, op-amp inputs);
- voltage-type branches in a loop: columns of branch currents that nothing else measures;
- an island that no current can leave or enter: rows of its nodes;
- an island whose voltage nothing feels: columns of its nodes.

Source: Vlach and Singhal, "Computer Methods for Circuit Analysis and Design", 1994, on loops of voltage
sources and cut sets of current sources (from memory).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass

from symamp.circuit.kinds import CAPACITANCE, CONDUCTANCE, INDUCTANCE, RESISTANCE
from symamp.circuit.stage import GROUND, Asked, Part, Stage
from symamp.errors import NetworkError, StageError

Pair = tuple[str, str]

_TWO_TERMINAL = frozenset({CONDUCTANCE, RESISTANCE, CAPACITANCE, INDUCTANCE})


def nodes_of(stage: Stage, without: tuple[str, ...] = ()) -> tuple[str, ...]:
    """The nodes of the stage in file order, signal ground left out; `without` takes parts off first."""
    seen: dict[str, None] = {}
    for part in _parts(stage, without):
        seen.update(dict.fromkeys(part.nodes))
    seen.pop(GROUND, None)
    return tuple(seen)


def check_network(stage: Stage, without: tuple[str, ...] = ()) -> None:
    """Refuse a network that has no unique solution whatever its values; `without` takes parts off first.

    Raises NetworkError naming the parts or nodes: a loop of voltage sources, nodes that current sources alone
    join to the rest, a node or an island that hangs on nothing, a node whose voltage nothing fixes, an op amp
    whose inputs are tied together by sources, a controlling part that was taken off. A network that passes
    may still be singular for a reason that is no loop and no island; then its determinant is zero.
    """
    _check_controls(stage, without)
    elements = list(_placed(stage, without))
    measured = {part.control for part in _parts(stage, without) if part.control is not None}
    _check_loops(stage, elements, _constraints)
    _check_loops(stage, elements, lambda element: _branches(element, measured))
    _check_current_paths(stage, elements, without)
    _check_felt(stage, elements, without)


def shorted_by(stage: Stage, pair: Pair, without: tuple[str, ...] = ()) -> tuple[str, ...]:
    """The voltage sources that, at rest, short the two nodes, in file order; () if none does.

    A path may run through an ammeter as well; a short made of ammeters alone belongs to the network: ().
    """
    forest = _Forest()
    sources = set()
    for element in _placed(stage, without):
        if element.what == "voltage_source":
            sources.add(element.part.label)
        if element.what != "opamp":
            for edge in _constraints(element):
                forest.join(edge, element.part.label)
    path = forest.path(*pair) or ()
    return tuple(label for label in _in_file_order(stage, path) if label in sources)


def check_looking_into(stage: Stage, asked: Asked) -> None:
    """Refuse an impedance at a node or pair that a resting voltage source shorts.

    Raises StageError, which proposes the source; does nothing for a response that is no impedance at a pair.
    """
    if asked.looking_into is None:
        return
    sources = shorted_by(stage, asked.looking_into, asked.without)
    if not sources:
        return
    first = sources[0]
    remedy = f'write looking_into = "{first}" for the impedance that {first} sees'
    if len(sources) > 1:
        remedy += f', or take one of them off first with without = ["{first}"]'
    raise StageError(
        f"{_place(asked.looking_into)} is shorted by {_listed(sources)}, at rest for this response",
        remedy,
        key=f"response.{asked.name}.looking_into",
    )


def check_asked(stage: Stage, asked: Asked) -> None:
    """All that a response asks of the network: its nodes still there, no shorted pair, one solution.

    Raises StageError or NetworkError with what is wrong and what would be right.
    """
    left = {GROUND, *nodes_of(stage, asked.without)}
    for key in ("to", "over", "looking_into"):
        pair: Pair | None = getattr(asked, key)
        gone = [node for node in pair or () if node not in left]
        if gone:
            raise StageError(
                f"nothing is left at node {gone[0]} with {_listed(asked.without)} taken off",
                f"keep a part at {gone[0]}, or ask about another node",
                key=f"response.{asked.name}.{key}",
            )
    check_looking_into(stage, asked)
    check_network(stage, asked.without)


# What the elements join -------------------------------------------------------------------------------------


@dataclass(frozen=True)
class _Placed:
    """An element of a part at its nodes; `dead` where its output is that of a source at rest."""

    part: Part
    what: str
    nodes: tuple[str, ...]
    dead: bool = False


def _parts(stage: Stage, without: tuple[str, ...]) -> Iterator[Part]:
    return (part for part in stage.parts.values() if part.label not in without)


def _placed(stage: Stage, without: tuple[str, ...]) -> Iterator[_Placed]:
    for part in _parts(stage, without):
        at = dict(zip(part.kind.terminals, part.nodes, strict=False)) | {GROUND: GROUND}
        # a space, which no node's name has, keeps the inner base apart from every other node
        at["inner"] = f"{part.label} inner" if "rx" in part.parameters else at.get("base", "")
        control = stage.parts.get(part.control or "")
        dead = control is not None and control.kind.name == "current_source"
        for element in part.kind.elements:
            if element.parameter is None or element.parameter in part.parameters:
                nodes = tuple(at[terminal] for terminal in element.terminals if terminal in at)
                yield _Placed(part, element.what, nodes, dead)


def _constraints(element: _Placed) -> list[Pair]:
    """Pairs whose voltage an element fixes by itself, as a number or as zero."""
    if element.what == "voltage_source":
        return [_pair(element.nodes)]
    if element.what in ("cccs", "ccvs") and len(element.nodes) == 4:
        return [_pair(element.nodes[2:])]  # an ideal ammeter
    return [_pair(element.nodes)] if element.what == "opamp" else []


def _branches(element: _Placed, measured: Iterable[str]) -> list[Pair]:
    """Pairs joined by a voltage-type branch whose current controls nothing."""
    if element.part.label in measured:
        return []
    return [_pair(element.nodes)] if element.what in ("voltage_source", "vcvs", "ccvs") else []


def _carries(element: _Placed) -> list[Pair]:
    """Pairs between which an element can carry a current that is not given from outside."""
    what, nodes = element.what, element.nodes
    if what == "opamp":
        return [(nodes[2], GROUND)]
    if what == "vccs":
        return [] if nodes[2] == nodes[3] else [_pair(nodes)]  # no control voltage, no current
    if what == "vcvs":
        return [_pair(nodes)]
    given = what == "current_source" or (what == "cccs" and element.dead)
    pairs = [] if given else [_pair(nodes)]
    return (
        [*pairs, _pair(nodes[2:])] if len(nodes) == 4 else pairs
    )  # an ammeter, a transformer's second winding


def _feels(element: _Placed) -> list[Pair]:
    """Pairs whose voltage stands in some equation because of this element."""
    what, nodes = element.what, element.nodes
    if what in _TWO_TERMINAL or what in ("voltage_source", "opamp"):
        return [_pair(nodes)]
    if what == "vccs":
        return [] if nodes[0] == nodes[1] else [_pair(nodes[2:])]
    pairs = [_pair(nodes)] if what in ("vcvs", "ccvs", "transformer") else []
    return [*pairs, _pair(nodes[2:])] if len(nodes) == 4 else pairs


def _pair(nodes: tuple[str, ...]) -> Pair:
    return nodes[0], nodes[1]


# The four looks ---------------------------------------------------------------------------------------------


def _check_controls(stage: Stage, without: tuple[str, ...]) -> None:
    for part in _parts(stage, without):
        if part.control is not None and part.control in without:
            raise NetworkError(
                f"the current of {part.control}, which is taken off, controls {part.label}",
                f'take {part.label} off as well: without = ["{part.control}", "{part.label}"]',
                key=_key(part),
            )


def _check_loops(stage: Stage, elements: list[_Placed], edges: Callable[[_Placed], list[Pair]]) -> None:
    forest = _Forest()
    for element in elements:
        for pair in edges(element):
            path = forest.path(*pair)
            if path is not None:
                raise _loop_error(stage, element.part, pair, path)
            forest.join(pair, element.part.label)


def _loop_error(stage: Stage, part: Part, pair: Pair, path: tuple[str, ...]) -> NetworkError:
    labels = _in_file_order(stage, (*path, part.label))
    opamps = [label for label in labels if stage.parts[label].kind.name == "opamp"]
    if opamps:
        first = opamps[0]
        rest = [label for label in labels if label != first]
        tied = f"tied together by {_listed(rest)}" if rest else f"both on node {pair[0]}"
        problem = f"the inputs of op amp {first} are {tied}, so that nothing sets its output"
        remedy = f"give {first} feedback to one of its inputs"
        return NetworkError(problem, remedy, key=_key(stage.parts[first]))
    if len(labels) == 1 and pair[0] == pair[1]:
        problem = f"both ends of voltage source {part.label} are on node {pair[0]}"
        if part.kind.name != "voltage_source":
            problem = f"{part.label} joins node {pair[0]} to itself"
        return NetworkError(problem, "join it to two different nodes", key=_key(part))
    return NetworkError(
        f"{_listed(labels)} are a loop of voltage sources, in which the current has no definite value",
        "take one of them off, or put a resistor in series with it",
        key=_key(part),
    )


def _check_current_paths(stage: Stage, elements: list[_Placed], without: tuple[str, ...]) -> None:
    island = _island(stage, elements, _carries, without)
    if not island:
        return
    nodes = _shown(stage, island)
    sources = [
        element.part
        for element in elements
        if element.what == "current_source" and len(island.intersection(element.nodes)) == 1
    ]
    if sources:
        labels = [part.label for part in sources]
        verb = "alone joins" if len(labels) == 1 else "alone join"
        raise NetworkError(
            f"{_listed(labels)} {verb} {_nodes(nodes)} to the rest, and a current source sets no voltage",
            f"give {nodes[0]} a path to gnd, such as a resistor or a capacitor",
            key=_key(sources[0]),
        )
    raise NetworkError(
        f"{_nodes(nodes)} {_verb(nodes, 'hang')} on nothing: no current can flow between "
        f"{_them(nodes)} and gnd (there: {_touching(stage, island, without)})",
        f"drive {nodes[0]}, or join it to gnd by a resistor, a capacitor or a source",
        key=_first_key(stage, island, without),
    )


def _check_felt(stage: Stage, elements: list[_Placed], without: tuple[str, ...]) -> None:
    island = _island(stage, elements, _feels, without)
    if not island:
        return
    nodes = _shown(stage, island)
    raise NetworkError(
        f"nothing fixes the voltage of {_nodes(nodes)}: only currents that do not depend on it flow there "
        f"(there: {_touching(stage, island, without)})",
        f"give the device at {nodes[0]} an output conductance, or put a load between {nodes[0]} and gnd",
        key=_first_key(stage, island, without),
    )


def _island(
    stage: Stage,
    elements: list[_Placed],
    edges: Callable[[_Placed], list[Pair]],
    without: tuple[str, ...],
) -> frozenset[str]:
    """The nodes of the first island, in file order, that no edge joins to signal ground; empty if none."""
    forest = _Forest()
    for element in elements:
        for pair in edges(element):
            forest.join(pair, element.part.label)
    grounded = forest.reach(GROUND)
    for node in nodes_of(stage, without):
        if node not in grounded:
            return forest.reach(node)
    return frozenset()


class _Forest:
    """Union-find that keeps the edges by which trees were joined, and so knows the path between two nodes."""

    def __init__(self) -> None:
        self._parents: dict[str, str] = {}
        self._edges: dict[str, dict[str, str]] = {}

    def join(self, pair: Pair, label: str) -> None:
        """Join the two nodes by an edge of that label; nothing happens where they are joined already."""
        first, second = pair
        if self._root(first) != self._root(second):
            self._parents[self._root(first)] = self._root(second)
            self._edges.setdefault(first, {})[second] = label
            self._edges.setdefault(second, {})[first] = label

    def path(self, first: str, second: str) -> tuple[str, ...] | None:
        """The labels from one node to the other, () from a node to itself, None where there is no way."""
        if self._root(first) != self._root(second):
            return None
        towards = self._towards(first)
        labels = []
        while second != first:
            second, label = towards[second]
            labels.append(label)
        return tuple(reversed(labels))

    def reach(self, node: str) -> frozenset[str]:
        """All nodes of the node's tree, itself included."""
        return frozenset(self._towards(node)) | {node}

    def _root(self, node: str) -> str:
        while (parent := self._parents.get(node, node)) != node:
            self._parents[node] = node = self._parents.get(parent, parent)  # halves the way for the next time
        return node

    def _towards(self, start: str) -> dict[str, tuple[str, str]]:
        """For each node of the tree but `start`: its neighbour on the way there, and that edge's label."""
        towards: dict[str, tuple[str, str]] = {}
        waiting = [start]
        while waiting:
            here = waiting.pop()
            for there, label in self._edges.get(here, {}).items():
                if there != start and there not in towards:
                    towards[there] = (here, label)
                    waiting.append(there)
        return towards


# Words ------------------------------------------------------------------------------------------------------


def _in_file_order(stage: Stage, labels: Iterable[str]) -> list[str]:
    wanted = set(labels)
    return [label for label in stage.parts if label in wanted]


def _shown(stage: Stage, island: frozenset[str]) -> list[str]:
    return [node for node in nodes_of(stage) if node in island]


def _touching(stage: Stage, island: frozenset[str], without: tuple[str, ...]) -> str:
    words = []
    for part in _parts(stage, without):
        for terminal, node in zip(part.kind.terminals, part.nodes, strict=False):
            if node in island:
                words.append(f"{terminal.replace('_', ' ')} of {part.label}")
    return _listed(words)


def _first_key(stage: Stage, island: frozenset[str], without: tuple[str, ...]) -> str:
    return next(_key(part) for part in _parts(stage, without) if island.intersection(part.nodes))


def _key(part: Part) -> str:
    return f"{part.kind.name}.{part.label}"


def _place(pair: Pair) -> str:
    nodes = [node for node in pair if node != GROUND]
    return f"node {nodes[0]}" if len(nodes) == 1 else f"the pair {pair[0]}, {pair[1]}"


def _nodes(nodes: list[str]) -> str:
    return f"node {nodes[0]}" if len(nodes) == 1 else f"nodes {_listed(nodes)}"


def _verb(nodes: list[str], verb: str) -> str:
    return f"{verb}s" if len(nodes) == 1 else verb


def _them(nodes: list[str]) -> str:
    return "it" if len(nodes) == 1 else "them"


def _listed(words: Iterable[str]) -> str:
    words = list(words)
    return " and ".join(filter(None, (", ".join(words[:-1]), words[-1]))) if words else ""
