"""A process of its own: one large response written out, its time, its terms, the peak memory of the process."""

from __future__ import annotations

import json
import resource
import sys
import time

from stages import STAGES  # beside this file, which is run by its path

from symamp.exact.cofactors import ratio_of
from symamp.exact.largest_written import write_out_products
from symamp.exact.system import build_system


def main() -> None:
    """Print {"terms", "seconds", "bytes", "dc"} of the stage named: dc as numerator and denominator text."""
    stage = STAGES[sys.argv[1]]()
    start = time.perf_counter()
    written = write_out_products(ratio_of(build_system(stage), stage.asked["gain"]), stage.symbols)
    spent = time.perf_counter() - start
    unit = 1 if sys.platform == "darwin" else 1024
    peak = resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * unit
    above, below = written.exact_coefficients(stage.bias)
    dc = above[0] / below[0]
    print(
        json.dumps({"terms": written.terms, "seconds": spent, "bytes": peak, "dc": float(dc.p) / float(dc.q)})
    )


if __name__ == "__main__":
    main()
