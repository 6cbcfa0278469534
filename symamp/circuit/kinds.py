"""The kinds of part: one small record each, and the elements that each is made of.

A kind says which terminals a part has, which parameters, and how it looks in small signals. The nodal matrix
reads `elements` alone, so a new kind needs nothing but its record here.
"""

from __future__ import annotations

from dataclasses import dataclass, field

# What a symbol is, which settles its limits ("short", "open", "neglect") and how it is printed.
CONDUCTANCE = "conductance"
TRANSCONDUCTANCE = "transconductance"
RESISTANCE = "resistance"
CAPACITANCE = "capacitance"
INDUCTANCE = "inductance"
GAIN = "gain"
TURNS_RATIO = "turns ratio"


@dataclass(frozen=True)
class Parameter:
    """A parameter of a kind: its bare name, unit ("S", "ohm", "F", "H" or "" for a pure number) and nature."""

    name: str
    unit: str
    nature: str
    may_be_zero: bool = False
    may_be_negative: bool = False


@dataclass(frozen=True)
class Element:
    """One ideal element inside a part: what it is, the parameter that values it, and the terminals it joins.

    `what` is one of conductance, resistance, capacitance, inductance (terminals a, b); vccs, vcvs (out+, out−,
    control+, control−); cccs, ccvs (out+, out−, then the control as the part says); voltage_source,
    current_source (plus, minus); opamp (plus, minus, out); transformer (a, b, c, d).
    """

    what: str
    parameter: str | None
    terminals: tuple[str, ...]


@dataclass(frozen=True)
class Kind:
    """A kind of part. `terminals` are in file order; `alias` maps an alias to (parameter, …) exponents."""

    name: str
    terminals: tuple[str, ...]
    parameters: tuple[Parameter, ...]
    elements: tuple[Element, ...]
    prefixed: bool = False  # symbols are parameter + label; else the label is the symbol
    default_parameters: tuple[str, ...] = ()
    aliases: dict[str, dict[str, int]] = field(default_factory=dict)

    def parameter(self, name: str) -> Parameter:
        """The parameter of that bare name; KeyError where there is none."""
        for parameter in self.parameters:
            if parameter.name == name:
                return parameter
        raise KeyError(name)


def _two(name: str, nature: str | None, unit: str) -> Kind:
    parameters = () if nature is None else (Parameter(name, unit, nature),)
    element = Element(nature or name, name if nature else None, ("plus", "minus"))
    return Kind(name, ("plus", "minus"), parameters, (element,))


def _controlled(name: str, unit: str) -> Kind:
    ports = ("out_plus", "out_minus", "control_plus", "control_minus")
    gain = Parameter(name, unit, GAIN, may_be_zero=True, may_be_negative=True)
    return Kind(name, ports, (gain,), (Element(name, name, ports),))


_MOSFET = Kind(
    "mosfet",
    ("gate", "drain", "source", "body"),
    (
        Parameter("gm", "S", TRANSCONDUCTANCE),
        Parameter("gds", "S", CONDUCTANCE),
        Parameter("gmb", "S", TRANSCONDUCTANCE, may_be_zero=True),
        Parameter("cgs", "F", CAPACITANCE),
        Parameter("cgd", "F", CAPACITANCE),
        Parameter("cgb", "F", CAPACITANCE),
        Parameter("cdb", "F", CAPACITANCE),
        Parameter("csb", "F", CAPACITANCE),
    ),
    (
        Element("vccs", "gm", ("drain", "source", "gate", "source")),
        Element("conductance", "gds", ("drain", "source")),
        Element("vccs", "gmb", ("drain", "source", "body", "source")),
        Element("capacitance", "cgs", ("gate", "source")),
        Element("capacitance", "cgd", ("gate", "drain")),
        Element("capacitance", "cgb", ("gate", "body")),
        Element("capacitance", "cdb", ("drain", "body")),
        Element("capacitance", "csb", ("source", "body")),
    ),
    prefixed=True,
    default_parameters=("gm", "gds"),  # and gmb where the body is not the source
    aliases={"ro": {"gds": -1}},
)

# "inner" is the base behind rx; it is the base itself while the part has no rx.
_BJT = Kind(
    "bjt",
    ("base", "collector", "emitter"),
    (
        Parameter("gm", "S", TRANSCONDUCTANCE),
        Parameter("gpi", "S", CONDUCTANCE),
        Parameter("go", "S", CONDUCTANCE),
        Parameter("rx", "ohm", RESISTANCE),
        Parameter("cpi", "F", CAPACITANCE),
        Parameter("cmu", "F", CAPACITANCE),
        Parameter("ccs", "F", CAPACITANCE),
    ),
    (
        Element("vccs", "gm", ("collector", "emitter", "inner", "emitter")),
        Element("conductance", "gpi", ("inner", "emitter")),
        Element("conductance", "go", ("collector", "emitter")),
        Element("resistance", "rx", ("base", "inner")),
        Element("capacitance", "cpi", ("inner", "emitter")),
        Element("capacitance", "cmu", ("inner", "collector")),
        Element("capacitance", "ccs", ("collector", "gnd")),
    ),
    prefixed=True,
    default_parameters=("gm", "gpi", "go"),
    aliases={"ro": {"go": -1}, "rpi": {"gpi": -1}, "beta": {"gm": 1, "gpi": -1}},
)

_TRANSFORMER = Kind(
    "transformer",
    ("primary_plus", "primary_minus", "secondary_plus", "secondary_minus"),
    (Parameter("transformer", "", TURNS_RATIO, may_be_negative=True),),
    (
        Element(
            "transformer",
            "transformer",
            ("primary_plus", "primary_minus", "secondary_plus", "secondary_minus"),
        ),
    ),
)

_OPAMP = Kind("opamp", ("plus", "minus", "out"), (), (Element("opamp", None, ("plus", "minus", "out")),))

KINDS: dict[str, Kind] = {
    kind.name: kind
    for kind in (
        _two("resistor", RESISTANCE, "ohm"),
        _two("capacitor", CAPACITANCE, "F"),
        _two("inductor", INDUCTANCE, "H"),
        _TRANSFORMER,
        _controlled("vccs", "S"),
        _controlled("vcvs", ""),
        _controlled("cccs", ""),
        _controlled("ccvs", "ohm"),
        _OPAMP,
        _two("voltage_source", None, ""),
        _two("current_source", None, ""),
        _MOSFET,
        _BJT,
    )
}

BARE_PARAMETERS: dict[str, tuple[str, ...]] = {}  # bare parameter or alias -> kinds of device that have it
for _kind in (_MOSFET, _BJT):
    for _name in (*(p.name for p in _kind.parameters), *_kind.aliases):
        BARE_PARAMETERS[_name] = (*BARE_PARAMETERS.get(_name, ()), _kind.name)
