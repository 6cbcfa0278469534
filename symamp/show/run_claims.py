"""The commands about claims: `check` and `frontier` (room: show). Read, work out, and only then print."""

from __future__ import annotations

from collections.abc import Sequence

from symamp.circuit.stage import Stage
from symamp.circuit.stagefile import read_stage
from symamp.errors import StageError
from symamp.judge.check import examine, make_check
from symamp.judge.claim import Claim
from symamp.judge.claim_reading import WITHIN, claim_of, read_claims
from symamp.judge.error_map import ErrorMap, error_map
from symamp.judge.frontier import frontier_of
from symamp.show.check_text import check_page
from symamp.show.claims_json import check_json, frontier_json
from symamp.show.frontier_text import frontier_page
from symamp.show.maps import map_of
from symamp.show.picture import checked_ending
from symamp.show.running import Bar, placed, print_json, printed_page
from symamp.span.workers import workers_of


def check(
    file: str,
    texts: Sequence[str],
    within: str | None,
    about: Sequence[str],
    points: int,
    seed: int,
    as_json: bool,
    workers: int | None = None,
    scheduler: str | None = None,
) -> int:
    """`symamp check`: 1 where a claim does not hold."""
    stage = read_stage(file)
    claims = _claims(stage, texts, within, about)
    with placed(stage), workers_of(workers, scheduler) as engine, Bar() as bar:
        found = make_check(
            stage, claims=claims, points=points, seed=seed, progress=bar.advance, executor=engine
        )
    if as_json:
        print_json(check_json(found))
    else:
        with printed_page() as page:
            check_page(page, found)
    return 0 if found.all_hold else 1


def frontier(
    file: str,
    texts: Sequence[str],
    within: str | None,
    about: Sequence[str],
    over: str | None,
    output: str | None,
    as_json: bool,
) -> int:
    """`symamp frontier`."""
    stage = read_stage(file)
    claims = _claims(stage, texts, within, about)
    symbols = _two_symbols(over, output)
    with placed(stage):
        examined = examine(stage, claims)
        frontiers = [frontier_of(each) for each in examined]
        drawn: ErrorMap | None = None
        if symbols is not None:
            if len(examined) != 1:
                known = ", ".join(each.claim.about for each in examined)
                raise StageError(
                    f"a map is of one claim, and there are {len(examined)}",
                    f"name it with --about, one of {known}",
                    key="--map",
                )
            drawn = error_map(examined[0], *symbols)
    if drawn is not None and output is not None:
        map_of(drawn).save(output)
    if as_json:
        result = frontier_json(stage, frontiers)
        if drawn is not None:
            result["map"] = {"file": output, "x": drawn.x.name, "y": drawn.y.name}
        print_json(result)
        return 0
    with printed_page() as page:
        frontier_page(page, stage, frontiers)
        if drawn is not None:
            page.prose(f"The map over {drawn.x.name} and {drawn.y.name} is in {output}.")
    return 0


def _claims(
    stage: Stage, texts: Sequence[str], within: str | None, about: Sequence[str]
) -> tuple[Claim, ...]:
    """The claims that options say, else those of the stage file; of these the ones that `about` names."""
    if within is not None and not texts:
        raise StageError(
            "--within is the error that --claim is allowed, and there is no --claim",
            "the claims of a stage file say their own",
            key="--within",
        )
    found = tuple(claim_of(stage, text, within or WITHIN) for text in texts) or read_claims(stage)
    for name in about:
        if all(claim.about != name for claim in found):
            known = ", ".join(dict.fromkeys(claim.about for claim in found)) or "there is none"
            raise StageError(f"no claim is about {name}", f"the claims are about {known}", key="--about")
    return tuple(claim for claim in found if not about or claim.about in about)


def _two_symbols(over: str | None, output: str | None) -> tuple[str, str] | None:
    if over is None:
        if output is not None:
            raise StageError("-o is where a map goes", "name its symbols, such as --map gm2,gds2", key="-o")
        return None
    parts = [part.strip() for part in over.split(",")]
    if len(parts) != 2 or not all(parts) or parts[0] == parts[1]:
        raise StageError(
            f"a map is over two symbols, and {over!r} names others", "such as --map gm2,gds2", key="--map"
        )
    if output is None:
        raise StageError("a map needs a file to go to", "such as -o map.svg", key="--map")
    checked_ending(output)
    return parts[0], parts[1]
