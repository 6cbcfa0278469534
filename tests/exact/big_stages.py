"""Large stages for tests and benchmarks: a bipolar op amp, a folded-cascode amplifier, a long ladder.

Both amplifiers are text-book arrangements with figures of our own choosing; currents and capacitances are of
the size that common practice has for such stages.
"""

from __future__ import annotations

from typing import Any

from symamp.circuit.builder import StageBuilder
from symamp.circuit.stage import Stage

THERMAL_VOLTAGE = 0.02585  # V, at 300 K

# Label: base, collector, emitter, collector current in µA, current gain, Early voltage in V.
_NPN, _PNP = (200, 90.0), (50, 55.0)
_BIPOLAR: dict[str, tuple[str, str, str, float, tuple[int, float]]] = {
    # input pair: followers into common-base transistors, and the diode of their common-mode loop
    "Q1": ("inp", "top", "e1", 9.5, _NPN),
    "Q2": ("inn", "top", "e2", 9.5, _NPN),
    "Q3": ("cb", "x1", "e1", 9.4, _PNP),
    "Q4": ("cb", "x2", "e2", 9.4, _PNP),
    "Q8": ("top", "top", "gnd", 18.0, _PNP),
    "Q9": ("top", "cb", "gnd", 19.0, _PNP),
    # mirror load with a helper, and the small current that the input pair hangs on
    "Q5": ("mb", "x1", "r5", 9.3, _NPN),
    "Q6": ("mb", "x2", "r6", 9.3, _NPN),
    "Q7": ("x1", "gnd", "mb", 11.0, _NPN),
    "Q10": ("b1", "cb", "r10", 19.0, _NPN),
    "Q11": ("b1", "b1", "gnd", 730.0, _NPN),
    "Q12": ("b2", "b2", "gnd", 730.0, _PNP),
    # gain stage: a follower into a common emitter with a current source for a load
    "Q15": ("x2", "gnd", "e15", 16.0, _NPN),
    "Q16": ("e15", "y", "r16", 550.0, _NPN),
    "Q13": ("b2", "y", "gnd", 550.0, _PNP),
    # output: a follower, a base-emitter multiplier under a current source, two complementary followers
    "Q18": ("y", "gnd", "z", 180.0, _PNP),
    "Q14": ("b2", "w", "gnd", 180.0, _PNP),
    "Q17": ("k", "w", "z", 160.0, _NPN),
    "Q19": ("w", "gnd", "o1", 170.0, _NPN),
    "Q20": ("z", "gnd", "o2", 170.0, _PNP),
}
_RESISTORS = {
    "R1": ("r5", "gnd", "1 kohm"),
    "R2": ("r6", "gnd", "1 kohm"),
    "R3": ("mb", "gnd", "50 kohm"),
    "R4": ("r10", "gnd", "5 kohm"),
    "R5": ("b2", "b1", "39 kohm"),
    "R6": ("o1", "out", "27 ohm"),
    "R7": ("o2", "out", "22 ohm"),
    "R8": ("e15", "gnd", "50 kohm"),
    "R9": ("r16", "gnd", "100 ohm"),
    "R10": ("w", "k", "4.5 kohm"),
    "R11": ("k", "z", "7.5 kohm"),
    "RL": ("out", "gnd", "2 kohm"),
}


def bipolar_opamp(*, with_rx: bool) -> Stage:
    """An op amp of 20 bipolar transistors: 23 nodes, the two driven ones included, and 20 more with rx.

    Its responses: `gain` (differential), `common` (both inputs together), `rout`, `rin`.
    """
    build = StageBuilder("bipolar operational amplifier")
    for label, (base, collector, emitter, current, kind) in _BIPOLAR.items():
        bias = _bipolar_bias(current, *kind)
        if with_rx:
            bias["rx"] = 250.0
        build.bjt(label, base=base, collector=collector, emitter=emitter, **bias)
    for label, (plus, minus, value) in _RESISTORS.items():
        build.resistor(label, plus, minus, value)
    build.capacitor("CC", "x2", "y", "30 pF")
    build.capacitor("CL", "out", "gnd", "100 pF")
    build.voltage_source("VP", "inp", "gnd")
    build.voltage_source("VN", "inn", "gnd")
    build.response("gain", source={"VP": 0.5, "VN": -0.5}, to="out")
    build.response("common", source={"VP": 1, "VN": 1}, to="out")
    build.response("rout", looking_into="out")
    build.response("rin", looking_into="VP")
    return build.stage()


def _bipolar_bias(current: float, beta: int, early: float) -> dict[str, Any]:
    """Small-signal parameters at a collector current in µA, to three digits.

    gm = I/V_T, gpi = gm/beta, go = I/V_A; cpi = 0.5 ns·gm + 0.3 pF, cmu 0.4 pF, ccs 1.2 pF.
    """
    gm = current * 1e-6 / THERMAL_VOLTAGE
    values = {"gm": gm, "gpi": gm / beta, "go": current * 1e-6 / early, "cpi": 0.5e-9 * gm + 0.3e-12}
    return {name: float(f"{value:.3g}") for name, value in values.items()} | {"cmu": 0.4e-12, "ccs": 1.2e-12}


# Label: gate, drain, source, gm in mS, gds in µS, gmb in mS; and a factor on all capacitances.
_MOS: dict[str, tuple[str, str, str, float, float, float, float]] = {
    "M1": ("in", "f1", "tail", 2.10, 28.0, 0.42, 1.0),
    "M2": ("gnd", "f2", "tail", 2.05, 27.0, 0.41, 1.0),
    "M4": ("gnd", "f1", "gnd", 2.60, 55.0, 0.52, 1.6),
    "M5": ("gnd", "f2", "gnd", 2.62, 56.0, 0.53, 1.6),
    "M6": ("gnd", "g", "f1", 1.45, 17.0, 0.30, 0.7),
    "M7": ("gnd", "out", "f2", 1.43, 16.0, 0.29, 0.7),
    "M8": ("gnd", "g", "m1", 1.20, 14.0, 0.24, 0.9),
    "M9": ("gnd", "out", "m2", 1.21, 13.0, 0.25, 0.9),
    "M10": ("g", "m1", "gnd", 1.15, 21.0, 0.0, 1.2),
    "M11": ("g", "m2", "gnd", 1.16, 22.0, 0.0, 1.2),
}
_MOS_CAPACITANCES = {"cgs": 31e-15, "cgd": 6.5e-15, "cgb": 1.4e-15, "cdb": 11e-15, "csb": 13e-15}


def folded_cascode() -> Stage:
    """A single-ended folded-cascode amplifier of 10 MOSFETs, all capacitances given; 8 nodes with the input's."""
    build = StageBuilder("folded-cascode amplifier")
    for label, (gate, drain, source, gm, gds, gmb, size) in _MOS.items():
        capacitances: dict[str, Any] = {
            name: float(f"{value * size:.3g}") for name, value in _MOS_CAPACITANCES.items()
        }
        bias: dict[str, Any] = {"gm": f"{gm} mS", "gds": f"{gds} uS"}
        if gmb:
            bias["gmb"] = f"{gmb} mS"
        build.mosfet(
            label,
            gate=gate,
            drain=drain,
            source=source,
            body=source if not gmb else "gnd",
            **bias,
            **capacitances,
        )
    build.resistor("RT", "tail", "gnd", "40 kohm")
    build.capacitor("CL", "out", "gnd", "2 pF")
    build.voltage_source("VIN", "in", "gnd")
    build.response("gain", source="VIN", to="out")
    build.response("rout", looking_into="out")
    return build.stage()


def ladder(nodes: int) -> Stage:
    """A ladder of resistors in series and capacitors to ground, with so many nodes, the driven one included."""
    build = StageBuilder(f"ladder of {nodes} nodes")
    build.voltage_source("VIN", "n1", "gnd")
    for k in range(2, nodes + 1):
        build.resistor(f"R{k}", f"n{k - 1}", f"n{k}", "1 kohm")
        build.capacitor(f"C{k}", f"n{k}", "gnd", "1 pF")
    build.response("transfer", source="VIN", to=f"n{nodes}")
    return build.stage()
