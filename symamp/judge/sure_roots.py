"""Where poles and zeros of a large response are not sure over a span (room: judge)."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from symamp.exact.asked_quantity import Quantity, is_root
from symamp.exact.forms import Nested
from symamp.exact.pencil import MANY_ROOTS, has_many_roots, pencil_roots
from symamp.exact.response import Response
from symamp.judge.sample import sample_of

_LOOKED_AT = 64  # points of the span at which roots from matrices and from coefficients are compared


def unsure_roots(exact: Response, quantities: Sequence[Quantity]) -> list[str]:
    """The warning, or none: roots are asked for, and at some points of the span neither way settles them."""
    form = exact.form
    if exact.stage.span.empty or not isinstance(form, Nested) or not any(map(is_root, quantities)):
        return []
    if max(form.skeleton.degrees) <= MANY_ROOTS:
        return []
    unsure, looked_at = 1, 1
    if has_many_roots(form):
        sample = sample_of(exact.stage)
        chosen = np.unique(np.linspace(0, sample.points - 1, _LOOKED_AT).astype(int))
        values = {name: np.asarray(value)[chosen] for name, value in sample.values.items()}
        found = pencil_roots(form, values, chosen.size)
        asked = {quantity.name for quantity in quantities}
        settled = [side.settled for name, side in (("z", found.zeros), ("p", found.poles)) if name in asked]
        unsure, looked_at = int((~np.all(settled, axis=0)).sum()), chosen.size
    if not unsure:
        return []
    where = f" (at {unsure} of {looked_at} bias points looked at)" if looked_at > 1 else ""
    return [
        f"{exact.name}: of so many roots those that lie close together are uncertain over the span{where}, for its "
        "nodal matrix and its coefficients do not settle them alike; those at the bias point are right to all digits"
    ]
