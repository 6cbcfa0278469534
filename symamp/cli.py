"""The command line: what is typed, and nothing else; what it does is in `symamp.show.run`.

The rooms are brought in when a command runs, so that `--help` answers at once.
"""

from __future__ import annotations

import os
import re
import signal
import sys
import threading
from importlib import import_module
from types import ModuleType
from typing import Any

import click

from symamp import __version__
from symamp.errors import SymampError

_CLAIMS = "symamp.show.run_claims"
_CONTROL = re.compile(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]")  # all but the line's end: a terminal would obey them
_FILE = click.argument("file", metavar="FILE")
_CLAIM = click.option(
    "--claim",
    "claims",
    metavar="RESPONSE.QUANTITY=FORMULA",
    multiple=True,
    help="Judge this formula in place of the stage file's claims (repeatable).",
)
_WITHIN = click.option(
    "--within", metavar="ERROR", help="The error that --claim is allowed; 5% unless given."
)
_ABOUT = click.option(
    "--about", metavar="RESPONSE.QUANTITY", multiple=True, help="Only the claims about this quantity."
)
_POINTS = click.option(
    "--points",
    type=click.IntRange(0, 100_000_000),
    default=4096,
    show_default=True,
    help="Points sampled from a box.",
)
_SEED = click.option(
    "--seed", type=click.IntRange(0), default=1, show_default=True, help="Seed of the sampling."
)
_WORKERS = click.option(
    "--workers",
    type=click.IntRange(1, 256),
    metavar="N",
    help="Look at the points in N processes; the figures stay the same to the last bit.",
)
_SCHEDULER = click.option(
    "--scheduler", metavar="ADDRESS", help="Look at the points on a running dask cluster; the same figures."
)
_JSON = click.option("--json", "as_json", is_flag=True, help="Print one JSON object and nothing else.")


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, prog_name="symamp")
def cli() -> None:
    """Exact small-signal analysis of transistor stages, and the error that each hand assumption adds.

    FILE is a stage file, a text that ends in .stage.toml. Results are small-signal and linear, at the stated bias.
    """


@cli.command(short_help="Exact and approximate expressions of a stage.")
@_FILE
@click.option(
    "--assume", metavar="NAME", multiple=True, help="Show the response under this assumption (or: all)."
)
@click.option(
    "--at", "frequencies", metavar="FREQ", multiple=True, help='Also the response at FREQ, such as "10 MHz".'
)
@click.option("--response", "responses", metavar="NAME", multiple=True, help="Only this response.")
@click.option("--ro", "resistances", is_flag=True, help="Write gds1 as 1/ro1, gpi1 as 1/rpi1.")
@click.option(
    "--second-opinion", is_flag=True, help="Derive it again by lcapy, with random values, and compare."
)
@click.option("--latex", "as_latex", is_flag=True, help="Print the expressions alone, as LaTeX to be pasted.")
@_JSON
def derive(
    file: str,
    assume: tuple[str, ...],
    frequencies: tuple[str, ...],
    responses: tuple[str, ...],
    resistances: bool,
    second_opinion: bool,
    as_latex: bool,
    as_json: bool,
) -> None:
    """Exact expressions of every response, their quantities and time constants."""
    _run("derive", file, assume, frequencies, responses, resistances, second_opinion, as_latex, as_json)


@cli.command(short_help="The error that each assumption adds.")
@_FILE
@click.option(
    "--quantity",
    "quantities",
    metavar="RESPONSE.QUANTITY",
    multiple=True,
    help="Which quantity, such as gain.p1 (repeatable); without any: dc, poles, zeros, bandwidth, unity gain.",
)
@_POINTS
@_SEED
@_WORKERS
@_SCHEDULER
@_JSON
def ledger(
    file: str,
    quantities: tuple[str, ...],
    points: int,
    seed: int,
    workers: int | None,
    scheduler: str | None,
    as_json: bool,
) -> None:
    """The error that each assumption adds, at the bias point and over the span."""
    _run("ledger", file, quantities, points, seed, as_json, workers, scheduler)


@cli.command(short_help="A verdict on each claim, with its tacit conditions.")
@_FILE
@_CLAIM
@_WITHIN
@_ABOUT
@_POINTS
@_SEED
@_WORKERS
@_SCHEDULER
@_JSON
def check(
    file: str,
    claims: tuple[str, ...],
    within: str | None,
    about: tuple[str, ...],
    points: int,
    seed: int,
    workers: int | None,
    scheduler: str | None,
    as_json: bool,
) -> None:
    """A verdict on each claim: its error, what it silently takes to be small, and what it follows from.

    The exit code is 1 where a claim does not hold all over the span.
    """
    _run("check", file, claims, within, about, points, seed, as_json, workers, scheduler, module=_CLAIMS)


@cli.command(short_help="Where a claim stops holding.")
@_FILE
@_CLAIM
@_WITHIN
@_ABOUT
@click.option(
    "--map", "over", metavar="X,Y", help="Draw the error over two symbols, with the frontier in it."
)
@click.option("-o", "--output", metavar="FILE", help="Where the map goes: .svg, .png or .pdf by its ending.")
@_JSON
def frontier(
    file: str,
    claims: tuple[str, ...],
    within: str | None,
    about: tuple[str, ...],
    over: str | None,
    output: str | None,
    as_json: bool,
) -> None:
    """For each tacit condition of a claim the ratio at which the error reaches what it is allowed."""
    _run("frontier", file, claims, within, about, over, output, as_json, module=_CLAIMS)


@cli.command(short_help="The shortest formula that holds, and what it rests on.")
@_FILE
@click.option(
    "--within", metavar="ERROR", required=True, help="The error that a formula is allowed, such as 5%."
)
@click.option(
    "--quantity",
    "quantities",
    metavar="RESPONSE.QUANTITY",
    multiple=True,
    help="Which quantity, such as gain.p1 (repeatable); without any: dc, poles, zeros, bandwidth.",
)
@click.option(
    "--response",
    "responses",
    metavar="NAME",
    multiple=True,
    help="The shortest N(s)/D(s) of this response (repeatable).",
)
@click.option("--plot", metavar="FILE", help="Draw terms against error: .svg, .png or .pdf by its ending.")
@_POINTS
@_SEED
@_JSON
def shorten(
    file: str,
    within: str,
    quantities: tuple[str, ...],
    responses: tuple[str, ...],
    plot: str | None,
    points: int,
    seed: int,
    as_json: bool,
) -> None:
    """For each quantity the shortest formula whose error stays within a bound all over the span.

    Named assumptions are made, of the stage file and of a catalogue of the usual ones, then single terms are left out.
    """
    asked = quantities, responses
    _run("shorten", file, within, *asked, plot, points, seed, as_json, module="symamp.show.run_shorten")


@cli.command(short_help="A design note in LaTeX, HTML or Markdown.")
@_FILE
@click.option(
    "-o",
    "--output",
    metavar="FILE",
    required=True,
    help="Where the note goes: .tex, .html or .md by its ending.",
)
@_POINTS
@_SEED
@_WORKERS
@_SCHEDULER
@_JSON
def note(
    file: str,
    output: str,
    points: int,
    seed: int,
    workers: int | None,
    scheduler: str | None,
    as_json: bool,
) -> None:
    """The stage, its exact and simplified expressions, the errors, the verdicts and plots, ready to hand in."""
    _run("note", file, output, points, seed, as_json, workers, scheduler, module="symamp.show.run_note")


@cli.command(short_help="The JSON Schema of stage files.")
@click.option(
    "--schema", is_flag=True, required=True, help="Print the JSON Schema of stage files, for editors."
)
def start(schema: bool) -> None:
    """What a new stage file needs: its JSON Schema, so that an editor completes and checks it."""
    _run("print_schema")


def _run(command: str, *arguments: Any, module: str = "symamp.show.run") -> None:
    """Bring the command in and run it; what the user got wrong is said in one message, exit 2."""
    try:
        code = getattr(_brought_in(module), command)(*arguments)
        sys.stdout.flush()
    except SymampError as error:
        click.echo(_CONTROL.sub("�", str(error)), err=True)
        sys.exit(2)
    except KeyboardInterrupt as interrupt:
        had = _CONTROL.sub("�", str(interrupt))
        click.echo(f"interrupted: {had}" if had else "interrupted", err=True)
        sys.exit(130)
    except BrokenPipeError:
        # Whoever reads has had enough.
        _drop_output()
        sys.exit(0)
    except OSError as error:
        _drop_output()
        click.echo(f"nothing more can be written: {error.strerror or error}", err=True)
        sys.exit(2)
    sys.exit(code)


def _drop_output() -> None:
    """What is left to be flushed at the end goes nowhere."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())


def _brought_in(name: str) -> ModuleType:
    """A module; an interrupt waits until it is there, for libraries half brought in make errors of their own of it."""
    usual = signal.getsignal(signal.SIGINT) is signal.default_int_handler
    if not usual or threading.current_thread() is not threading.main_thread():
        return import_module(name)
    pressed: list[int] = []
    before = signal.signal(signal.SIGINT, lambda number, _: pressed.append(number))
    try:
        module = import_module(name)
    finally:
        signal.signal(signal.SIGINT, before)
    if pressed:
        raise KeyboardInterrupt
    return module


def main() -> None:
    """The installed command."""
    cli(prog_name="symamp")
