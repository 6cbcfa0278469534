"""Room `circuit`: the JSON Schema of the stage file, made from the kinds of part, for editors to complete by.

A schema sees the shape alone: whether a node, a symbol or a selector exists is for the reader of stage files.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from symamp.circuit.kinds import BARE_PARAMETERS, KINDS, Kind

Schema = dict[str, Any]

DIALECT = "https://json-schema.org/draft/2020-12/schema"

# Labels begin with a letter, and one of a single letter is an error.
_LABEL = "^[A-Za-z][A-Za-z0-9_]+$"
_NODE = r"^\S{1,100}$"
_PERCENT = r"^\s*[0-9]+(\.[0-9]+)?\s*%\s*$"


@dataclass(frozen=True)
class AssumptionKey:
    """A key of an assumption in a stage file: what its value looks like, and what it means.

    `shape` is one of "names" (selectors), "name" (one label), "formulas" (a table of symbol = formula),
    "bridge" (a table for the bridging part), "true" (the value true), "frequency". `partner` is the key that
    must stand beside it; `excludes` are keys that must not.
    """

    key: str
    shape: str
    meaning: str
    partner: str | None = None
    excludes: tuple[str, ...] = ()


ASSUMPTION_KEYS: tuple[AssumptionKey, ...] = (
    AssumptionKey(
        "equal", "names", "These parts' symbols are one; the part that stands first stands for all."
    ),
    AssumptionKey("set", "formulas", "Each symbol is replaced by a formula."),
    AssumptionKey(
        "neglect", "names", "Device parameters, controlled-source gains or capacitances taken to 0."
    ),
    AssumptionKey("open", "names", "R to infinity, C to 0, L to infinity."),
    AssumptionKey("short", "names", "R to 0, C to infinity, L to 0."),
    AssumptionKey("dominant_capacitor", "name", "Every capacitor but this one is neglected."),
    AssumptionKey(
        "miller", "bridge", "The bridging part Y becomes Y(1 − A) at `from` and Y(1 − 1/A) at `to`."
    ),
    AssumptionKey("small", "names", "What is small against each name in `against`.", partner="against"),
    AssumptionKey("against", "names", "What each name in `small` is small against.", partner="small"),
    AssumptionKey(
        "dominant_pole", "true", "The denominator becomes b0 + b1·s, the numerator a0.", excludes=("band",)
    ),
    AssumptionKey(
        "poles_far_apart", "true", "p_k = −b_(k−1)/b_k and z_k = −a_(k−1)/a_k.", excludes=("band",)
    ),
    AssumptionKey(
        "band",
        "frequency",
        "Only the power of s that is largest at this frequency stays, above and below.",
        excludes=("dominant_pole", "poles_far_apart"),
    ),
)


def stage_schema() -> Schema:
    """The JSON Schema (draft 2020-12) of a stage file, as plain dicts and lists; a new one at every call."""
    sections = {name: _section(kind) for name, kind in KINDS.items()}
    return {
        "$schema": DIALECT,
        "title": "symamp stage",
        "description": "A transistor stage: parts, responses, bias, span, assumptions and claims.",
        "type": "object",
        "properties": {
            "title": _text("Title", "What the stage is, in a few words."),
            **sections,
            "response": _response_section(),
            "bias": _bias_section(),
            "span": _span_section(),
            "assumption": _array_of(_assumption(), "The assumptions, in the order in which they are listed."),
            "claim": _array_of(_claim(), "Hand formulas, each with the error that it is allowed."),
        },
        "additionalProperties": False,
        "$defs": _definitions(),
    }


# Parts ------------------------------------------------------------------------------------------------------


def _section(kind: Kind) -> Schema:
    return {
        "title": kind.name.replace("_", " "),
        "description": f"Parts of the kind {kind.name.replace('_', ' ')}, by label.",
        "type": "object",
        "propertyNames": {"pattern": _LABEL},
        "additionalProperties": _part(kind),
    }


def _part(kind: Kind) -> Schema:
    if kind.terminals == ("plus", "minus"):
        return {"$ref": "#/$defs/pair"}
    shape = _ports(kind) if kind.terminals[0].endswith("_plus") else _terminals(kind)
    return {"type": "object", "additionalProperties": False, **shape}


def _terminals(kind: Kind) -> Schema:
    properties: Schema = {name: _ref("node", f"The node of the {name}.") for name in kind.terminals}
    required = list(kind.terminals)
    if kind.name == "mosfet":
        properties["body"] = {**_ref("node", "The node of the body, gnd unless given."), "default": "gnd"}
        required.remove("body")
    return {"properties": properties, "required": required}


def _ports(kind: Kind) -> Schema:
    """Kinds whose terminals come in pairs: out and control, or primary and secondary."""
    names = list(dict.fromkeys(terminal.rpartition("_")[0] for terminal in kind.terminals))
    properties = {name: _ref("pair", f"The {name} pair, plus before minus.") for name in names}
    if kind.name in ("cccs", "ccvs"):
        properties["control"] = {
            "description": "The two-terminal part whose current controls, or a pair that an ammeter joins.",
            "anyOf": [{"type": "string", "pattern": _LABEL}, {"$ref": "#/$defs/pair"}],
        }
    return {"properties": properties, "required": names}


# Responses, bias, span --------------------------------------------------------------------------------------


def _response_section() -> Schema:
    without = {
        "description": "Parts taken off first.",
        "type": "array",
        "items": {"type": "string", "pattern": _LABEL},
    }
    ratio = {
        "type": "object",
        "properties": {
            "from": {"$ref": "#/$defs/drive"},
            "to": {
                "description": "A node, a pair of nodes, or a voltage source's name for its current.",
                "$ref": "#/$defs/place",
            },
            "over": {
                "description": "The node or pair that the output is divided by.",
                "$ref": "#/$defs/place",
            },
            "without": without,
        },
        "required": ["from", "to"],
        "additionalProperties": False,
    }
    impedance = {
        "type": "object",
        "properties": {
            "looking_into": {
                "description": "A node or a pair, or a source's name for the impedance that it sees.",
                "$ref": "#/$defs/place",
            },
            "without": without,
        },
        "required": ["looking_into"],
        "additionalProperties": False,
    }
    return {
        "title": "responses",
        "description": "The responses wanted: a ratio from a drive to an output, or an impedance.",
        "type": "object",
        "additionalProperties": {"anyOf": [ratio, impedance]},
    }


def _bias_section() -> Schema:
    values = {
        name: _ref("value", f"{name} at the operating point ({_owners(name)}).") for name in BARE_PARAMETERS
    }
    device = {"type": "object", "properties": values, "minProperties": 1, "additionalProperties": False}
    return {
        "title": "bias",
        "description": "The value of every symbol at the operating point, part by part.",
        "type": "object",
        "additionalProperties": {"anyOf": [{"$ref": "#/$defs/value"}, device]},
    }


def _owners(name: str) -> str:
    return ", ".join(BARE_PARAMETERS[name])


def _span_section() -> Schema:
    ends = {
        "description": "Lowest and highest value.",
        "type": "array",
        "items": {"$ref": "#/$defs/value"},
        "minItems": 2,
        "maxItems": 2,
    }
    follows = {
        "type": "object",
        "properties": {"follows": {"type": "string", "description": "Keeps its bias ratio to this symbol."}},
        "required": ["follows"],
        "additionalProperties": False,
    }
    return {
        "title": "span",
        "description": "The bias points over which statements must hold: the sides of a box, or one table.",
        "type": "object",
        "properties": {"table": _text("Table", "A CSV file: one bias point a row, units in the header.")},
        "additionalProperties": {"anyOf": [ends, {"$ref": "#/$defs/percent"}, follows]},
        "if": {"required": ["table"]},
        "then": {"maxProperties": 1},
    }


# Assumptions and claims -------------------------------------------------------------------------------------


def _assumption() -> Schema:
    properties: Schema = {
        "name": _text("Name", "The name by which the assumption is called."),
        "for": {"$ref": "#/$defs/names", "description": "The responses that it is limited to."},
    }
    for entry in ASSUMPTION_KEYS:
        properties[entry.key] = {"description": entry.meaning, **_SHAPES[entry.shape]}
    return {
        "type": "object",
        "properties": properties,
        "required": ["name"],
        "anyOf": [{"required": [entry.key]} for entry in ASSUMPTION_KEYS],
        "dependentRequired": {entry.key: [entry.partner] for entry in ASSUMPTION_KEYS if entry.partner},
        "dependentSchemas": {
            entry.key: {"properties": dict.fromkeys(entry.excludes, False)}
            for entry in ASSUMPTION_KEYS
            if entry.excludes
        },
        "additionalProperties": False,
    }


_SHAPES: dict[str, Schema] = {
    "names": {"$ref": "#/$defs/names"},
    "name": {"type": "string", "minLength": 1},
    "formulas": {
        "type": "object",
        "minProperties": 1,
        "additionalProperties": {"anyOf": [{"type": "string", "minLength": 1}, {"type": "number"}]},
    },
    "bridge": {
        "type": "object",
        "properties": {
            "part": {"type": "string", "description": "The bridging part."},
            "from": {"$ref": "#/$defs/node"},
            "to": {"$ref": "#/$defs/node"},
            "ends": {"enum": ["both", "from"], "description": "Both ends, or the first alone."},
        },
        "required": ["part", "from", "to"],
        "additionalProperties": False,
    },
    "true": {"const": True},
    "frequency": {"$ref": "#/$defs/value"},
}


def _claim() -> Schema:
    return {
        "type": "object",
        "properties": {
            "about": _text("About", "RESPONSE.QUANTITY, such as gain.dc or gain.p1.hz."),
            "formula": {
                "description": "The hand formula.",
                "anyOf": [{"type": "string", "minLength": 1}, {"type": "number"}],
            },
            "within": {
                "description": 'The error that it is allowed: "10 %", "0.5 dB", "2 deg".',
                "anyOf": [{"type": "string", "minLength": 1}, {"type": "number", "exclusiveMinimum": 0}],
            },
        },
        "required": ["about", "formula", "within"],
        "additionalProperties": False,
    }


# Shared shapes ----------------------------------------------------------------------------------------------


def _definitions() -> Schema:
    node = {"$ref": "#/$defs/node"}
    return {
        "node": {"type": "string", "pattern": _NODE, "description": "A node; gnd is signal ground."},
        "pair": {
            "type": "array",
            "items": node,
            "minItems": 2,
            "maxItems": 2,
            "description": "Two nodes, plus before minus.",
        },
        "place": {"anyOf": [node, {"$ref": "#/$defs/pair"}]},
        "value": {
            "anyOf": [{"type": "string", "pattern": "[0-9]"}, {"type": "number"}],
            "description": 'Text with SI prefix and unit ("4.1 mS"), or a bare number in SI units.',
        },
        "percent": {
            "type": "string",
            "pattern": _PERCENT,
            "description": "Plus and minus this much of the bias value.",
        },
        "names": {
            "anyOf": [
                {"type": "array", "items": {"type": "string", "minLength": 1}, "minItems": 1},
                {"type": "string", "minLength": 1},
            ]
        },
        "drive": {
            "description": "A source, or several driven together by exact numbers.",
            "anyOf": [
                {"type": "string", "pattern": _LABEL},
                {
                    "type": "object",
                    "propertyNames": {"pattern": _LABEL},
                    "additionalProperties": {"$ref": "#/$defs/value"},
                    "minProperties": 1,
                },
            ],
        },
    }


def _ref(name: str, description: str) -> Schema:
    return {"$ref": f"#/$defs/{name}", "description": description}


def _text(title: str, description: str) -> Schema:
    return {"title": title, "description": description, "type": "string", "minLength": 1}


def _array_of(items: Schema, description: str) -> Schema:
    return {"description": description, "type": "array", "items": items}
