"""Room `circuit`: a stage written in Python, part by part.

The builder only collects what a stage file would say. The stage itself comes from the text of that file, read
as any other, so that both ways mean the same and fail with the same words.
"""

from __future__ import annotations

import os
from collections.abc import Mapping, Sequence
from dataclasses import replace
from fractions import Fraction
from pathlib import Path
from typing import Any

from symamp.circuit.kinds import KINDS
from symamp.circuit.stage import GROUND, Stage
from symamp.circuit.stagefile import parse_stage
from symamp.circuit.writer import exact_number, exact_text, moved, stage_toml, write_whole
from symamp.errors import StageError

Value = str | int | float | Fraction  # "4.1 mS", or a number in SI units
Pair = tuple[str, str]
Place = str | Pair  # a node against signal ground, or a pair of nodes

_IN_PYTHON = "(stage written in Python)"  # stands for the file in messages


class StageBuilder:
    """A stage in the making. Each method adds one thing and returns nothing; `stage()` reads and checks all.

    Nodes, labels, values and selectors are as in a stage file. StageError at once for a label, a response or
    a span entry that is given twice; all other checks wait for `stage()`, which knows the whole.
    """

    def __init__(self, title: str) -> None:
        self._title = title
        self._parts: dict[str, dict[str, Any]] = {}
        self._sections: dict[str, dict[str, Any]] = {"response": {}, "bias": {}, "span": {}}
        self._lists: dict[str, list[dict[str, Any]]] = {"assumption": [], "claim": []}

    # Parts with two terminals

    def resistor(self, label: str, plus: str, minus: str, value: Value | None = None) -> None:
        """A resistor between two nodes, its value in ohm."""
        self._add_part("resistor", label, [plus, minus], {"": (value, "ohm")})

    def capacitor(self, label: str, plus: str, minus: str, value: Value | None = None) -> None:
        """A capacitor between two nodes, its value in F."""
        self._add_part("capacitor", label, [plus, minus], {"": (value, "F")})

    def inductor(self, label: str, plus: str, minus: str, value: Value | None = None) -> None:
        """An inductor between two nodes, its value in H."""
        self._add_part("inductor", label, [plus, minus], {"": (value, "H")})

    def voltage_source(self, label: str, plus: str, minus: str) -> None:
        """An independent voltage source: a drive, or a short while it rests."""
        self._add_part("voltage_source", label, [plus, minus], {})

    def current_source(self, label: str, plus: str, minus: str) -> None:
        """An independent current source, its current from plus to minus inside itself; at rest it is open."""
        self._add_part("current_source", label, [plus, minus], {})

    # Devices

    def mosfet(
        self,
        label: str,
        *,
        gate: str,
        drain: str,
        source: str,
        body: str = GROUND,
        gm: Value | None = None,
        gds: Value | None = None,
        gmb: Value | None = None,
        cgs: Value | None = None,
        cgd: Value | None = None,
        cgb: Value | None = None,
        cdb: Value | None = None,
        csb: Value | None = None,
        ro: Value | None = None,
    ) -> None:
        """A MOSFET and its bias: conductances in S, capacitances in F, `ro` = 1/gds in ohm in place of gds.

        It has the parameters that are given; with none it has gm, gds and, where the body is not its source,
        gmb.
        """
        nodes = {"gate": gate, "drain": drain, "source": source, "body": body}
        conductances = _in({"gm": gm, "gds": gds, "gmb": gmb}, "S")
        capacitances = _in({"cgs": cgs, "cgd": cgd, "cgb": cgb, "cdb": cdb, "csb": csb}, "F")
        self._add_part("mosfet", label, nodes, conductances | {"ro": (ro, "ohm")} | capacitances)

    def bjt(
        self,
        label: str,
        *,
        base: str,
        collector: str,
        emitter: str,
        gm: Value | None = None,
        gpi: Value | None = None,
        go: Value | None = None,
        rx: Value | None = None,
        cpi: Value | None = None,
        cmu: Value | None = None,
        ccs: Value | None = None,
        ro: Value | None = None,
        rpi: Value | None = None,
        beta: Value | None = None,
    ) -> None:
        """A bipolar transistor and its bias: conductances in S, capacitances in F, resistances in ohm.

        `ro` = 1/go, `rpi` = 1/gpi or `beta` = gm/gpi may stand in place of the conductance. It has the
        parameters that are given; with none it has gm, gpi and go.
        """
        nodes = {"base": base, "collector": collector, "emitter": emitter}
        conductances = _in({"gm": gm, "gpi": gpi, "go": go}, "S")
        capacitances = _in({"cpi": cpi, "cmu": cmu, "ccs": ccs}, "F")
        resistances = _in({"rx": rx, "ro": ro, "rpi": rpi}, "ohm")
        bias = conductances | {"beta": (beta, "")} | resistances | capacitances
        self._add_part("bjt", label, nodes, bias)

    # Controlled sources, op amp, transformer

    def vccs(self, label: str, *, out: Pair, control: Pair, value: Value | None = None) -> None:
        """A current `value`·V(control), in S, out of the node out-plus and into out-minus."""
        self._add_ports("vccs", label, {"out": out, "control": control}, value)

    def vcvs(self, label: str, *, out: Pair, control: Pair, value: Value | None = None) -> None:
        """A voltage `value`·V(control) at the pair out."""
        self._add_ports("vcvs", label, {"out": out, "control": control}, value)

    def cccs(self, label: str, *, out: Pair, control: Place, value: Value | None = None) -> None:
        """A current of `value` times the control current: a part's, or an ammeter's at a pair."""
        self._add_ports("cccs", label, {"out": out, "control": control}, value)

    def ccvs(self, label: str, *, out: Pair, control: Place, value: Value | None = None) -> None:
        """A voltage of `value`, in ohm, times the control current: a part's, or an ammeter's at a pair."""
        self._add_ports("ccvs", label, {"out": out, "control": control}, value)

    def opamp(self, label: str, *, plus: str, minus: str, out: str) -> None:
        """An ideal op amp: no voltage between its inputs, no current into them."""
        self._add_part("opamp", label, {"plus": plus, "minus": minus, "out": out}, {})

    def transformer(self, label: str, *, primary: Pair, secondary: Pair, value: Value | None = None) -> None:
        """An ideal transformer; `value` is its turns ratio, primary to secondary."""
        self._add_ports("transformer", label, {"primary": primary, "secondary": secondary}, value)

    # Responses and span

    def response(
        self,
        name: str,
        *,
        source: str | Mapping[str, Value] | None = None,
        to: Place | None = None,
        over: Place | None = None,
        looking_into: Place | None = None,
        without: str | Sequence[str] = (),
    ) -> None:
        """A ratio, from `source` (a label, or weights of several) to `to`; or an impedance `looking_into`.

        `source` is what a stage file calls `from`, which is a word of Python's own.
        """
        drive = source
        if isinstance(source, Mapping):
            place = f"response.{name}.from"
            drive = {
                label: exact_number(weight, f"{place}.{label}") if isinstance(weight, Fraction) else weight
                for label, weight in source.items()
            }
        given = {"from": drive, "to": _place(to), "over": _place(over), "looking_into": _place(looking_into)}
        entry = {key: item for key, item in given.items() if item is not None}
        self._add_entry("response", name, entry | ({"without": _names(without)} if without else {}))

    def span(self, name: str, low: Value, high: Value) -> None:
        """A side of the box: a symbol, an alias or a bare parameter, from its least to its greatest value.

        Numbers are in SI units; a `Fraction` must have a finite decimal.
        """
        place = f"span.{name}"
        self._add_entry("span", name, [_written(low, "", place), _written(high, "", place)])

    def span_percent(self, name: str, percent: str) -> None:
        """A side of the box about the bias value: "30 %" is plus and minus 30 % of it."""
        self._add_entry("span", name, percent)

    def follows(self, name: str, leader: str) -> None:
        """A symbol that keeps its bias ratio to another."""
        self._add_entry("span", name, {"follows": leader})

    def table(self, path: str | os.PathLike[str]) -> None:
        """A table of bias points in place of a box; a relative path counts from the working folder."""
        self._add_entry("span", "table", os.fspath(path))

    # Assumptions and claims

    def assume(
        self,
        name: str,
        *,
        equal: str | Sequence[str] | None = None,
        set_: Mapping[str, str | int | float] | None = None,
        neglect: str | Sequence[str] | None = None,
        open_: str | Sequence[str] | None = None,
        short: str | Sequence[str] | None = None,
        dominant_capacitor: str | None = None,
        miller: Mapping[str, str] | None = None,
        small: str | Sequence[str] | None = None,
        against: str | Sequence[str] | None = None,
        dominant_pole: bool = False,
        poles_far_apart: bool = False,
        band: Value | None = None,
        for_: str | Sequence[str] | None = None,
    ) -> None:
        """A named assumption; each keyword is the key of a stage file, with `_` after Python's own words.

        `miller` is a mapping with `part`, `from`, `to` and, where one end alone is meant, `ends`.
        """
        lists = {"equal": equal, "neglect": neglect, "open": open_, "short": short}
        lists |= {"small": small, "against": against}
        others = {
            "set": None if set_ is None else dict(set_),
            "dominant_capacitor": dominant_capacitor,
            "miller": None if miller is None else dict(miller),
            "dominant_pole": dominant_pole or None,
            "poles_far_apart": poles_far_apart or None,
            "band": None if band is None else _written(band, "Hz", f"assumption.{name}.band"),
        }
        given = {key: None if names is None else _names(names) for key, names in lists.items()} | others
        entry = {key: item for key, item in given.items() if item is not None}
        limited = {} if for_ is None else {"for": _names(for_)}
        self._lists["assumption"].append({"name": name, **entry, **limited})

    def claim(self, about: str, formula: str, *, within: str) -> None:
        """A hand formula for a quantity (`gain.dc`), and the error that it is allowed ("10 %", "0.5 dB")."""
        self._lists["claim"].append({"about": about, "formula": formula, "within": within})

    # What comes of it

    def toml(self) -> str:
        """The text of the stage file. Raises StageError for what no stage file can say."""
        return stage_toml(self._document())

    def save(self, path: str | os.PathLike[str]) -> Path:
        """Save the stage file, whole or not at all; returns its path.

        The path of a table is written as seen from the file's folder. Raises StageError where the name does
        not end in `.stage.toml`, and OSError as the file system does. Only `stage()` checks what is saved.
        """
        document = self._document()
        if "table" in self._sections["span"]:
            document["span"]["table"] = moved(document["span"]["table"], Path(), Path(path).parent)
        return write_whole(path, stage_toml(document))

    def stage(self) -> Stage:
        """The stage, read from its text and checked.

        Raises what the reading of stage files raises; lines in messages are those of `toml()`.
        """
        stage = parse_stage(self.toml().encode(), file=_IN_PYTHON, folder=Path())
        return replace(stage, file=None)

    def _document(self) -> dict[str, Any]:
        filled = {**self._sections, **self._lists}
        sections = {key: section for key, section in filled.items() if section}
        if "span" in sections:
            sections["span"] = dict(self._sections["span"])
        return {"title": self._title or "stage", **self._parts, **sections}

    def _add_part(
        self, kind: str, label: str, nodes: Any, bias: Mapping[str, tuple[Value | None, str]]
    ) -> None:
        for other, section in self._parts.items():
            if label in section:
                raise StageError(
                    f"{label} is there already, as a {other.replace('_', ' ')}",
                    "give each part a label of its own",
                    key=f"{kind}.{label}",
                )
        place = f"bias.{label}"
        values = {
            name: _written(value, unit, f"{place}.{name}".rstrip("."))
            for name, (value, unit) in bias.items()
            if value is not None
        }
        self._parts.setdefault(kind, {})[label] = nodes
        if values:
            self._sections["bias"][label] = values.get("", values)

    def _add_ports(self, kind: str, label: str, ports: Mapping[str, Place], value: Value | None) -> None:
        unit = KINDS[kind].parameters[0].unit
        self._add_part(kind, label, {name: _place(port) for name, port in ports.items()}, {"": (value, unit)})

    def _add_entry(self, section: str, name: str, entry: Any) -> None:
        if name in self._sections[section]:
            raise StageError(f"{name} is given twice", "give it once", key=f"{section}.{name}")
        self._sections[section][name] = entry


def _in(values: Mapping[str, Value | None], unit: str) -> dict[str, tuple[Value | None, str]]:
    return {name: (value, unit) for name, value in values.items()}


def _written(value: Value, unit: str, place: str) -> str | int | float:
    """The value as a stage file has it; fractions become exact text."""
    if not isinstance(value, Fraction):
        return value
    return exact_text(value, unit, place)


def _place(place: Place | None) -> str | list[str] | None:
    return place if place is None or isinstance(place, str) else list(place)


def _names(names: str | Sequence[str]) -> list[str]:
    return [names] if isinstance(names, str) else list(names)
