"""A process of its own: the cascode's transfer function by lcapy, all symbols, and the time that it takes.

Reads {"runs", "values": {symbol: "p/q"}, "s": "p/q"} from standard input; answers {"seconds": […], "value": "p/q"},
the transfer function at those values. The first run is not counted: the process is then warm.
"""

from __future__ import annotations

import json
import sys
import time
import warnings
from typing import Any

# A transistor's current is taken into the first node of a G: source, drain, then gate and source.
NETLIST = """
V1 1 0
C1 1 0 cgs1
C2 1 2 cgd1
C3 2 0 cdb1
G1 0 2 1 0 gm1
R1 2 0 {1/gds1}
C4 2 0 cgs2
C5 3 0 cgd2
C6 3 0 cdb2
C7 2 0 csb2
G2 2 3 0 2 gm2
G3 2 3 0 2 gmb2
R2 3 2 {1/gds2}
C8 3 0 CL
"""


def main() -> None:
    """Answer the question on standard input."""
    warnings.simplefilter("ignore")  # importing lcapy warns
    import lcapy
    import sympy

    question = json.load(sys.stdin)
    spent = []
    transfer: Any = None
    for _ in range(1 + question["runs"]):
        start = time.perf_counter()
        transfer = lcapy.Circuit(NETLIST).transfer(1, 0, 3, 0)
        spent.append(time.perf_counter() - start)
    values = {**question["values"], "s": question["s"]}
    expression = transfer.sympy
    found = expression.subs({x: sympy.Rational(values[str(x)]) for x in expression.free_symbols})
    json.dump({"seconds": spent[1:], "value": str(found)}, sys.stdout)


if __name__ == "__main__":
    main()
