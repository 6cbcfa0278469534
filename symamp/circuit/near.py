"""Room `circuit`: what to propose where a name is not known."""

from __future__ import annotations

import difflib
from collections.abc import Iterable


def nearest(name: str, known: Iterable[str]) -> str | None:
    """The known name that looks most like this one, or None where none looks like it.

    Names that differ only in upper and lower case are nearest; then by the ratio of matching characters
    (Ratcliff and Obershelp, as Python's difflib works it out).
    """
    known = list(dict.fromkeys(known))
    name = name[:60]
    for candidate in known:
        if candidate.lower() == name.lower():
            return candidate
    likeness = {candidate: difflib.SequenceMatcher(None, name, candidate).ratio() for candidate in known}
    best = max(known, key=likeness.__getitem__, default=None)  # the first of equals
    return best if best is not None and likeness[best] >= 0.5 else None


def propose(name: str, known: Iterable[str], what: str = "names") -> str:
    """The remedy for an unknown name: the nearest known one, or else the known ones."""
    known = list(dict.fromkeys(known))
    found = nearest(name, known)
    if found is not None:
        return f"the nearest known one is {found}"
    if not known:
        return f"there are no {what} here"
    return f"the {what} here: {', '.join(known[:12])}{', ...' if len(known) > 12 else ''}"
