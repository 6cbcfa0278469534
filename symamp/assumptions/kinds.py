"""The kinds of assumption: a record each, with its step, the order of its error, and where it comes from.

`order` says how the error falls as the ratio that the assumption takes to be small is shrunk: error ~ ratio**order.
`ratio` says in words which ratio that is. Tests measure each declared order as a slope.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class AssumptionKind:
    """A kind: the stage file's `keys`, the `step` in which it acts, what it says, and its error's order."""

    name: str
    keys: tuple[str, ...]
    step: int
    statement: str
    ratio: str
    order: int
    source: str


KINDS: dict[str, AssumptionKind] = {
    kind.name: kind
    for kind in (
        AssumptionKind(
            "equal",
            ("equal",),
            1,
            "the parts' symbols are one: the first part in the stage file stands for all",
            "relative difference of the parts' values",
            1,
            "common practice (matched devices)",
        ),
        AssumptionKind(
            "set",
            ("set",),
            1,
            "a symbol is replaced by a formula",
            "relative difference between the symbol and the formula",
            1,
            "common practice",
        ),
        AssumptionKind(
            "neglect",
            ("neglect",),
            2,
            "device parameters, gains and capacitances go to zero",
            "the neglected parameter against what it adds to",
            1,
            "common practice",
        ),
        AssumptionKind(
            "open",
            ("open",),
            2,
            "resistors and inductors go to infinity, capacitors to zero",
            "the part's admittance against what it stands beside",
            1,
            "common practice",
        ),
        AssumptionKind(
            "short",
            ("short",),
            2,
            "resistors and inductors go to zero, capacitors to infinity",
            "the part's impedance against what it stands in series with",
            1,
            "common practice",
        ),
        AssumptionKind(
            "dominant_capacitor",
            ("dominant_capacitor",),
            2,
            "every other capacitor is neglected",
            "the other capacitors against the dominant one",
            1,
            "common practice",
        ),
        AssumptionKind(
            "miller",
            ("miller",),
            3,
            "a bridging part becomes one part to ground at each end, by the gain at s = 0",
            "a pole's frequency against that at which the gain across the part starts to fall",
            1,
            "J. M. Miller, Scientific Papers of the Bureau of Standards 15, 1920",
        ),
        AssumptionKind(
            "dominance",
            ("small", "against"),
            4,
            "a term falls to one in the same coefficient in which y stands where it has x",
            "x against y",
            1,
            "common practice; the partial order of exponents is this program's",
        ),
        AssumptionKind(
            "dominant_pole",
            ("dominant_pole",),
            5,
            "the denominator becomes b0 + b1·s, the numerator a0",
            "the lowest pole against the next",
            1,
            "Gray, Hurst, Lewis, Meyer, Analysis and Design of Analog Integrated Circuits, 5e, 7.3.2",
        ),
        AssumptionKind(
            "poles_far_apart",
            ("poles_far_apart",),
            5,
            "each root is minus the ratio of two neighbouring coefficients",
            "each root against the next",
            1,
            "Gray, Hurst, Lewis, Meyer, Analysis and Design of Analog Integrated Circuits, 5e, 7.3.2",
        ),
        AssumptionKind(
            "band",
            ("band",),
            5,
            "of numerator and denominator one power of s stays, the largest at a frequency",
            "the other powers of s against the largest, at that frequency",
            1,
            "H. W. Bode, Network Analysis and Feedback Amplifier Design, 1945",
        ),
    )
}

KEYS: dict[str, AssumptionKind] = {key: kind for kind in KINDS.values() for key in kind.keys}
