"""Whatever a stage file says, there is an answer or a message: a valid one changed at random."""

from __future__ import annotations

from pathlib import Path

from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st
from test_bad_input import CASCODE, command, saved

MARKS = "\"=[]{}'#,\\\ufeff\x00é\n0-"
WORDS = ("gnd", "gm", "e9", "nan", "true", "1979-05-27", "out", "||", "open = ", "short = ", '"M1"', "100 %")
PIECES = st.sampled_from([*MARKS, *WORDS, "[span]\n", "[[assumption]]\n"])


@st.composite
def mutated(draw: st.DrawFn) -> str:
    """The cascode's stage file with a few pieces cut, doubled, put elsewhere or replaced."""
    text = CASCODE
    for _ in range(draw(st.integers(1, 4))):
        start = draw(st.integers(0, len(text)))
        stop = min(len(text), start + draw(st.integers(0, 30)))
        kind = draw(st.sampled_from(["cut", "double", "put", "swap"]))
        piece = draw(PIECES) if kind in ("put", "swap") else text[start:stop] * (kind == "double") * 2
        text = text[:start] + piece + text[stop if kind != "put" else start :]
    return text


@settings(
    max_examples=150,
    deadline=None,
    suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow],
)
@given(mutated(), st.sampled_from(["derive", "ledger"]))
def test_whatever_a_file_says_there_is_an_answer_or_a_message(tmp_path: Path, text: str, asked: str) -> None:
    path = saved(tmp_path, text.encode("utf-8", "surrogatepass"))
    options = ("--points", "4") if asked == "ledger" else ("--assume", "all")
    result = command(asked, path, *options)
    assert result.exception is None or isinstance(result.exception, SystemExit), repr(result.exception)
    if result.exit_code == 0:
        assert result.stdout
        assert result.stderr == ""
    else:
        assert result.exit_code == 2
        assert result.stdout == ""
        first, *below = result.stderr.splitlines()
        assert first.startswith(f"{path}:"), result.stderr
        assert all(line.startswith("    ") for line in below)  # a formula, and a caret under it
