"""From a cold start, bytecode compiled: commands in processes of their own, against `import sympy`."""

from __future__ import annotations

import json
import statistics
import subprocess
import sys
import tempfile
import time
from pathlib import Path

from symamp.judge.ledger import make_ledger

from .ledgers import environment
from .record import Row, Sizes, shown
from .stages import cascode, cascode_file


def cold_start(sizes: Sizes) -> list[Row]:
    """`symamp ledger`, `check` and `--help`; runs are interleaved, so that a busy moment falls on all alike."""
    with tempfile.TemporaryDirectory() as folder:
        path, claims = (Path(folder) / f"{name}.stage.toml" for name in ("cascode", "claims"))
        path.write_text(cascode_file(), encoding="utf-8")
        claims.write_text(cascode_file() + _claims(), encoding="utf-8")
        commands = {
            "sympy": ["-c", "import sympy"],
            "ledger": ["-m", "symamp", "ledger", str(path)],
            "check": ["-m", "symamp", "check", str(claims)],
            "help": ["-m", "symamp", "--help"],
        }
        for arguments in commands.values():
            _run(arguments, sizes)
        times: dict[str, list[float]] = {name: [] for name in commands}
        for _ in range(sizes.runs):
            for name, arguments in commands.items():
                start = time.perf_counter()
                _run(arguments, sizes)
                times[name].append(time.perf_counter() - start)
        printed = json.loads(_run([*commands["ledger"], "--json"], sizes))
    spent = {name: statistics.median(found) for name, found in times.items()}
    account = make_ledger(cascode(), quantities=["gain.dc"], points=0)["gain.dc"]
    assert isinstance(account.error, float)
    difference = abs(printed["quantities"]["gain.dc"]["error"] / account.error - 1)
    return [
        _row("symamp ledger", "ledger", 5.0, spent, difference),
        _row(f"symamp check of {len(CLAIMS)} claims", "check", 4.0, spent, difference),
        _row("symamp --help", "help", 0.5, spent, difference),
    ]


# Ten claims of one cascode, right and wrong ones.
CLAIMS = (
    ("gain.dc", "-gm1*gm2*ro1*ro2"),
    ("gain.dc", "-gm1*(gm2 + gmb2)*ro1*ro2"),
    ("gain.dc", "-gm1*(ro1 + ro2 + (gm2 + gmb2)*ro1*ro2)"),
    ("gain.dc", "-gm1*ro1"),
    ("gain.p1", "-1/((gm2 + gmb2)*ro1*ro2*CL)"),
    ("gain.p1.hz", "1/(2*pi*gm2*ro1*ro2*CL)"),
    ("gain.p1.hz", "1/(gm2*ro1*ro2*CL)"),
    ("gain.bandwidth", "1/(2*pi*(gm2 + gmb2)*ro1*ro2*CL)"),
    ("gain.unity_gain_frequency", "gm1/(2*pi*CL)"),
    ("gain.dc.db", "gm1*gm2*ro1*ro2"),
)


def _claims() -> str:
    tables = []
    for about, formula in CLAIMS:
        within = "2 dB" if about.endswith("db") else "25 %"
        tables.append(f'[[claim]]\nabout = "{about}"\nformula = "{formula}"\nwithin = "{within}"\n')
    return "".join(tables)


def _row(what: str, name: str, allowed: float, spent: dict[str, float], difference: float) -> Row:
    ratio = spent[name] / spent["sympy"]
    return Row(
        f"{what} from a cold start, against import sympy",
        f"≤ {allowed:g} times as long",
        f"{shown(spent[name])} against {shown(spent['sympy'])}",
        ratio,
        ratio <= allowed,
        difference,
        0.0,
    )


def _run(arguments: list[str], sizes: Sizes) -> str:
    done = subprocess.run(
        [sys.executable, *arguments],
        capture_output=True,
        text=True,
        encoding="utf-8",
        timeout=sizes.patience,
        check=False,
        env=environment() | {"PYTHONIOENCODING": "utf-8"},
    )
    assert done.returncode in (0, 1), done.stderr  # 1: a claim that does not hold
    return done.stdout
