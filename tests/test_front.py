"""The front: public names, commands, options and tables of kinds, each held against the README."""

from __future__ import annotations

import inspect
import re
from typing import Any

import click
import pytest
from examples import ROOT

import symamp
from symamp.assumptions.kinds import KEYS
from symamp.assumptions.kinds import KINDS as ASSUMPTIONS
from symamp.circuit.kinds import KINDS as PARTS
from symamp.circuit.schema import ASSUMPTION_KEYS
from symamp.cli import cli
from symamp.exact.asked_quantity import FACES, NAMES
from symamp.exact.forms import EXPAND_LIMIT, WRITTEN_LIMIT
from symamp.judge.ledger import POINTS, SEED
from symamp.judge.sets import SHARES_LIMIT

PAGE = (ROOT / "README.md").read_text(encoding="utf-8")


def first_column(header: str) -> list[str]:
    """What stands in backquotes in the first column of the table whose first heading is `header`."""
    start = PAGE.index(f"\n| {header} |")
    table = PAGE[start + 1 :].split("\n\n")[0].splitlines()[2:]
    return [name for row in table for name in re.findall(r"`([^`]+)`", row.split(" | ")[0])]


def commands() -> dict[str, click.Command]:
    return dict(cli.commands)


def options(command: click.Command) -> set[str]:
    return {o for p in command.params if isinstance(p, click.Option) for o in p.opts if o.startswith("--")}


def test_public_names_are_those_of_the_readme() -> None:
    assert sorted(first_column("name")) == sorted(set(symamp.__all__) - {"__version__"})


@pytest.mark.parametrize("name", symamp.__all__)
def test_public_names_exist_and_say_what_they_are(name: str) -> None:
    found = getattr(symamp, name)
    assert name in dir(symamp)
    assert name == "__version__" or found.__doc__


def test_an_unknown_name_is_refused() -> None:
    with pytest.raises(AttributeError, match="has no attribute 'simulate'"):
        symamp.simulate  # noqa: B018


@pytest.mark.parametrize("name", ["Stage", "StageResponse", "StageLedger", "StageBuilder"])
def test_members_named_in_the_readme_exist(name: str) -> None:
    (row,) = (line for line in PAGE.splitlines() if line.startswith(f"| `{name}` |"))
    named = re.findall(r"`([a-z_]+)(?:\([^`]*\))?`", row.split(" | ")[1])
    assert named
    for member in named:
        assert hasattr(getattr(symamp, name), member)


@pytest.mark.parametrize("name", ["Stage", "StageResponse", "StageLedger", "StageBuilder"])
def test_public_methods_have_docstrings(name: str) -> None:
    public: dict[str, Any] = {k: v for k, v in vars(getattr(symamp, name)).items() if not k.startswith("_")}
    assert [k for k, v in public.items() if callable(v) and not v.__doc__] == []


def test_commands_are_those_of_the_readme() -> None:
    assert [text.split()[1] for text in first_column("command")] == list(commands())


def test_options_are_those_of_the_readme() -> None:
    known = set().union(*map(options, commands().values()))
    assert sorted(first_column("option")) == sorted(known)


def test_options_belong_to_the_commands_that_the_readme_says() -> None:
    rows = re.findall(r"^\| `(--[a-z-]+)` \| ([^|]+) \|", PAGE, re.MULTILINE)
    said = {option: set(re.findall(r"`([a-z]+)`", where)) for option, where in rows}
    assert said == {option: {n for n, c in commands().items() if option in options(c)} for option in said}


def test_numbers_of_the_readme_are_those_of_the_code() -> None:
    assert f"sampled from a box ({POINTS})" in PAGE
    assert f"the seed of the sampling ({SEED})" in PAGE
    assert f"up to {SHARES_LIMIT} assumptions" in PAGE
    written_out = f"more than {EXPAND_LIMIT:,} product terms, or of {WRITTEN_LIMIT:,} once".replace(
        ",0", " 0"
    )
    assert written_out in PAGE


def test_assumptions_are_those_of_the_readme() -> None:
    assert first_column("kind") == list(ASSUMPTIONS)
    for kind in ASSUMPTIONS.values():
        assert all(f"`{key} = " in PAGE for key in kind.keys)


def test_parts_are_those_of_the_readme() -> None:
    assert sorted(first_column("section")) == sorted(PARTS)


@pytest.mark.parametrize("label", ["mosfet", "bjt"])
def test_device_symbols_are_those_of_the_readme(label: str) -> None:
    (row,) = (line for line in PAGE.splitlines() if line.startswith(f"| `{label}` |"))
    last = row.split(" | ")[2]
    kind = PARTS[label]
    named = [name.removesuffix("1") for text in re.findall(r"`([^`]+)`", last) for name in text.split()]
    assert named == [*(p.name for p in kind.parameters), *kind.aliases]


def test_quantities_are_those_of_the_readme() -> None:
    told = set(first_column("quantity"))
    assert set(NAMES) <= told
    assert told - set(NAMES) == {"p1", "p2", "z1", "at(10 MHz)", "b0", "b1", "a0"}
    assert all(f".{face}" in PAGE for face in FACES)


def test_the_schema_and_the_reader_know_the_same_keys() -> None:
    assert [entry.key for entry in ASSUMPTION_KEYS] == list(KEYS)


def test_the_builder_takes_every_key_of_an_assumption() -> None:
    taken = {name.rstrip("_") for name in inspect.signature(symamp.StageBuilder.assume).parameters}
    assert taken == {"self", "name", "for", *KEYS}


def test_the_house_in_the_guide_is_that_of_the_files() -> None:
    guide = (ROOT / "DEVELOPERS.md").read_text(encoding="utf-8")
    told = set(re.findall(r"^- `([a-z_.]+)`: ", guide, re.MULTILINE))
    package = ROOT / "symamp"
    files = [path.relative_to(package).with_suffix("") for path in package.rglob("*.py")]
    there = {".".join(path.parts) for path in files if not path.name.startswith("__")}
    assert there - told == set(), "not in DEVELOPERS.md"
    assert told - there == set(), "in DEVELOPERS.md, and gone"
