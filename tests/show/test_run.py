"""The commands as a whole: the bar that appears after a while, and what is printed at the end."""

from __future__ import annotations

import io
from pathlib import Path

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, saved

from symamp.show import run, running


class Terminal(io.StringIO):
    """Text that a person may watch."""

    def __init__(self, watched: bool) -> None:
        super().__init__()
        self.watched = watched

    def isatty(self) -> bool:
        return self.watched


class Clock:
    """A clock that is set by hand."""

    def __init__(self) -> None:
        self.now = 100.0

    def monotonic(self) -> float:
        return self.now


@pytest.fixture
def clock(monkeypatch: pytest.MonkeyPatch) -> Clock:
    hand = Clock()
    monkeypatch.setattr(running, "time", hand)
    return hand


def watch(monkeypatch: pytest.MonkeyPatch, out: bool, err: bool) -> tuple[Terminal, Terminal]:
    terminals = Terminal(out), Terminal(err)
    monkeypatch.setattr("sys.stdout", terminals[0])
    monkeypatch.setattr("sys.stderr", terminals[1])
    monkeypatch.setenv("TERM", "xterm")
    return terminals


def test_a_bar_appears_after_two_seconds(monkeypatch: pytest.MonkeyPatch, clock: Clock) -> None:
    out, err = watch(monkeypatch, True, True)
    with running.Bar() as bar:
        bar.advance("bias points", 1000, 100_000)
        clock.now += 1.9
        bar.advance("bias points", 2000, 100_000)
        assert err.getvalue() == ""
        clock.now += 0.2
        bar.advance("bias points", 30_000, 100_000)
        assert bar._bar is not None
        assert bar._bar.tasks[0].completed == 30_000
        assert bar._bar.tasks[0].total == 100_000
    assert "bias points" in err.getvalue()
    assert "30,000/100,000" in err.getvalue()
    assert out.getvalue() == ""
    assert bar._bar.finished or not bar._bar.live.is_started  # it is taken away again


@pytest.mark.parametrize(("out", "err"), [(False, True), (True, False), (False, False)])
def test_no_bar_where_nobody_watches(
    monkeypatch: pytest.MonkeyPatch, clock: Clock, out: bool, err: bool
) -> None:
    terminals = watch(monkeypatch, out, err)
    with running.Bar() as bar:
        clock.now += 60
        bar.advance("bias points", 30_000, 100_000)
    assert [terminal.getvalue() for terminal in terminals] == ["", ""]


def test_a_bar_is_taken_away_when_the_run_fails(monkeypatch: pytest.MonkeyPatch, clock: Clock) -> None:
    watch(monkeypatch, True, True)
    bar = running.Bar()

    def interrupted() -> None:
        with bar:
            clock.now += 3
            bar.advance("bias points", 1, 2)
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        interrupted()
    assert bar._bar is not None
    assert not bar._bar.live.is_started


def test_colour_only_where_a_person_watches(monkeypatch: pytest.MonkeyPatch, tmp_path: Path) -> None:
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.delenv("FORCE_COLOR", raising=False)
    path = saved(tmp_path, CASCODE.replace('gmb = "0.62 mS", ', ""), SPAN, ASSUMPTIONS)
    shown = {}
    for watched in (True, False):
        out, _ = watch(monkeypatch, watched, watched)
        assert run.ledger(path, ("gain.dc",), 8, 1, False) == 0
        shown[watched] = out.getvalue()
    assert "\x1b[1m" in shown[True]  # bold
    assert "\x1b" not in shown[False]


def test_nothing_is_printed_of_json_that_cannot_be_written(monkeypatch: pytest.MonkeyPatch) -> None:
    out, _ = watch(monkeypatch, False, False)
    with pytest.raises(ValueError, match="JSON"):
        running.print_json({"stage": "x", "value": float("nan")})
    assert out.getvalue() == ""
