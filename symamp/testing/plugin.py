"""The pytest plugin's door (room: testing): its options, and nothing that takes time.

pytest imports this in every run of every project where symamp is installed, so it brings in nothing of symamp.
What collects stage files is brought in where a run asks for it, by `--stage-claims` or the ini option
`stage_claims = true`.
"""

from __future__ import annotations

import pytest

MARKER = "stage_claim: a claim of a stage file, collected by --stage-claims"


def pytest_addoption(parser: pytest.Parser) -> None:
    """The option, and the same for a configuration file."""
    text = "collect *.stage.toml, and make each claim in them a test"
    group = parser.getgroup("stage claims")
    group.addoption("--stage-claims", action="store_true", default=False, help=text)
    parser.addini("stage_claims", text, type="bool", default=False)


def pytest_configure(config: pytest.Config) -> None:
    """Bring in what collects, where it is asked for."""
    config.addinivalue_line("markers", MARKER)
    if config.getoption("stage_claims") or config.getini("stage_claims"):
        config.pluginmanager.import_plugin("symamp.testing.collecting")
