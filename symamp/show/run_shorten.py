"""The command `shorten` (room: show). Read, work out, and only then print."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

from symamp.circuit.stagefile import read_stage
from symamp.errors import InputError, StageError
from symamp.judge.shorten import make_shortest
from symamp.judge.shortest import Shortening, Shortest, ShortestResponse
from symamp.show.picture import Picture, checked_ending
from symamp.show.running import Bar, placed, print_json, printed_page
from symamp.show.shorten_json import shorten_json
from symamp.show.shorten_text import shorten_page
from symamp.show.tradeoff import tradeoff
from symamp.values import read_percent


def shorten(
    file: str,
    within: str,
    quantities: Sequence[str],
    responses: Sequence[str],
    plot: str | None,
    points: int,
    seed: int,
    as_json: bool,
) -> int:
    """`symamp shorten`: 0 also where a quantity has no short formula, which is said."""
    bound = allowed_error(within)
    if plot is not None:
        checked_ending(plot)
    stage = read_stage(file)
    with placed(stage), Bar() as bar:
        made = make_shortest(
            stage,
            bound,
            quantities=quantities,
            responses=responses,
            points=points,
            seed=seed,
            progress=bar.advance,
        )
    drawn = None
    if plot is not None:
        drawn = Path(plot)
        tradeoff_picture(made).save(drawn)
    if as_json:
        print_json(shorten_json(made))
        return 0
    with printed_page() as page:
        shorten_page(page, made)
        if drawn is not None:
            page.prose(f"The trade-off is drawn in {drawn}.")
    return 0


def allowed_error(text: str) -> float:
    """A percentage that is more than 0. Raises InputError whose key is the option."""
    try:
        bound = float(read_percent(text))
    except InputError as error:
        raise error.at(key="--within") from None
    if not bound > 0:
        raise StageError(
            "a formula within 0 % is the exact one", "allow a little, such as 5%", key="--within"
        )
    return bound


def tradeoff_picture(made: Shortening) -> Picture:
    """Terms against worst error of the one formula asked for. StageError where there are several, or nothing."""
    every: list[Shortest | ShortestResponse] = [*made.found, *made.responses]
    if len(every) != 1:
        known = ", ".join(found.name for found in made.found)
        raise StageError(
            f"a plot is of one quantity, and there are {len(every)}",
            f"name it with --quantity, one of {known}",
            key="--plot",
        )
    (found,) = every
    if not found.tradeoff:
        raise StageError(f"there is nothing to plot: {found.why}", "ask for another quantity", key="--plot")
    steps = [(step.terms, step.worst) for step in found.tradeoff]
    return tradeoff(steps, made.within, name=f"{found.name}-tradeoff", title=found.name)
