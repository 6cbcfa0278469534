"""The pytest plugin, in runs of pytest of their own: off unless asked for, claims as tests, verdicts as failures.

Most runs are inside this process, for speed; what such a run imports first is unloaded after it, so libraries that
can be loaded only once are imported here.
"""

from __future__ import annotations

import subprocess
import sys
from importlib.metadata import entry_points
from pathlib import Path

import pytest
import tree_sitter_toml  # noqa: F401
from held_stages import COMMON_SOURCE, COMMON_SOURCE_BIAS, COMMON_SOURCE_SPAN

from symamp.circuit.stagefile import parse_stage
from symamp.judge.claim_reading import read_claims
from symamp.testing.collecting import item_names

pytest_plugins = ["pytester"]

HOLDS = '[[claim]]\nabout = "gain.dc"\nformula = "-gm1*(ro1 || RL)"\nwithin = "1 %"\n'
FAILS = '[[claim]]\nabout = "gain.dc"\nformula = "-gm1*RL"\nwithin = "30 %"\n'
WRONG = '[[claim]]\nabout = "gain.dc"\nformula = "-2*gm1*(ro1 || RL)"\nwithin = "10 %"\n'
POLE = '[[claim]]\nabout = "gain.p1.hz"\nformula = "1/(2*pi*(ro1 || RL)*CL)"\nwithin = "1 %"\n'
NETWORK = COMMON_SOURCE + COMMON_SOURCE_BIAS + COMMON_SOURCE_SPAN


@pytest.fixture
def run(pytester: pytest.Pytester) -> pytest.Pytester:
    """A folder with a stage of one claim that holds and one that does not."""
    write(pytester.path, NETWORK + HOLDS + FAILS)
    return pytester


def write(folder: Path, text: str, name: str = "amplifier") -> None:
    (folder / f"{name}.stage.toml").write_text(text, encoding="utf-8")


def test_the_plugin_is_registered_once() -> None:
    found = [each for each in entry_points(group="pytest11") if each.name == "symamp"]
    assert {each.value for each in found} == {"symamp.testing.plugin"}


def test_nothing_is_collected_unless_asked_for(run: pytest.Pytester) -> None:
    result = run.runpytest_inprocess()
    assert result.ret == pytest.ExitCode.NO_TESTS_COLLECTED
    result.assert_outcomes()


@pytest.mark.parametrize("how", ["option", "ini"])
def test_each_claim_is_a_test(run: pytest.Pytester, how: str) -> None:
    if how == "ini":
        run.makeini("[pytest]\nstage_claims = true\n")
    result = run.runpytest_subprocess("-v", *(["--stage-claims"] if how == "option" else []))
    result.assert_outcomes(passed=1, failed=1)
    result.stdout.fnmatch_lines(
        [
            "amplifier.stage.toml::gain.dc = -gm1*(ro1 || RL) PASSED*",
            "amplifier.stage.toml::gain.dc = -gm1*RL FAILED*",
        ]
    )
    assert result.ret == pytest.ExitCode.TESTS_FAILED


def test_a_failure_tells_the_verdict_and_no_traceback(run: pytest.Pytester) -> None:
    result = run.runpytest_inprocess("--stage-claims")
    result.stdout.fnmatch_lines(
        [
            "*_ Common-source stage: gain.dc = -gm1[*]RL _*",
            "holds at the bias point, and not over the span",
            "gain.dc = -gm1*RL, within 30 %",
            "  holds here: +25.2 % at the bias point, and up to +120 % over the span",
            "  error = gds1·RL",
            "  it takes to be small *",
            "  gds1·RL *0.252 *1.20 *+25.2 %",
            "Over the span: proved*",
            "FAILED amplifier.stage.toml::gain.dc = -gm1*RL - holds at the*",
        ]
    )
    result.stdout.no_fnmatch_line("*Traceback*")
    result.stdout.no_fnmatch_line("*collecting.py*")


def test_a_wrong_claim_says_by_what(pytester: pytest.Pytester) -> None:
    write(pytester.path, NETWORK + WRONG)
    result = pytester.runpytest_inprocess("--stage-claims")
    result.stdout.fnmatch_lines(["is no limit of the exact expression", "  wrong: *"])
    result.assert_outcomes(failed=1)


def test_one_claim_can_be_run_by_its_name(run: pytest.Pytester) -> None:
    name = "amplifier.stage.toml::gain.dc = -gm1*(ro1 || RL)"
    run.runpytest_inprocess("--stage-claims", name).assert_outcomes(passed=1)
    write(run.path, NETWORK + POLE, "pole")
    name = "pole.stage.toml::gain.p1.hz = 1/(2*pi*(ro1 || RL)*CL)"
    run.runpytest_inprocess("--stage-claims", name).assert_outcomes(passed=1)
    run.runpytest_inprocess("--stage-claims", "-k", "p1").assert_outcomes(passed=1, deselected=2)


def test_the_marker_is_known(run: pytest.Pytester) -> None:
    run.makepyfile(test_other="def test_other():\n    pass\n")
    result = run.runpytest_inprocess("--stage-claims", "--strict-markers", "-m", "not stage_claim")
    result.assert_outcomes(passed=1, deselected=2)
    assert "stage_claim" in run.runpytest_inprocess("--markers").stdout.str()


def test_verdicts_of_claims_that_hold_can_be_read(run: pytest.Pytester) -> None:
    result = run.runpytest_inprocess("--stage-claims", "-rP", "--junitxml=out.xml")
    result.stdout.fnmatch_lines(["*gain.dc = -gm1*(ro1 || RL), within 1 %", "  holds: *"])
    assert '<property name="verdict" value="holds here" />' in (run.path / "out.xml").read_text("utf-8")


def test_workers_share_the_claims(run: pytest.Pytester) -> None:
    write(run.path, NETWORK + POLE, "pole")
    run.runpytest_subprocess("--stage-claims", "-n", "2").assert_outcomes(passed=2, failed=1)


def test_a_broken_file_is_an_error_in_our_words(run: pytest.Pytester) -> None:
    write(run.path, NETWORK.replace('CL = "3.3 pF"', 'CL = "3.3 mS"'), "broken")
    write(run.path, NETWORK + FAILS.replace("gm1", "gm7"), "unknown")
    result = run.runpytest_inprocess("--stage-claims", "--continue-on-collection-errors")
    result.assert_outcomes(passed=1, failed=1, errors=2)
    line = NETWORK.splitlines().index('CL = "3.3 pF"') + 1
    result.stdout.fnmatch_lines([f"*broken.stage.toml:{line}: bias.CL: *", "*unknown.stage.toml:*: *gm7*"])
    result.stdout.no_fnmatch_line("*Traceback*")


def test_a_claim_that_cannot_be_judged_fails_alone(pytester: pytest.Pytester) -> None:
    """Siemens and ohm are added: only judging finds that."""
    write(pytester.path, NETWORK + HOLDS + FAILS.replace("-gm1*RL", "gm1/(gds1 + RL)"))
    result = pytester.runpytest_inprocess("--stage-claims")
    result.assert_outcomes(passed=1, failed=1)
    result.stdout.fnmatch_lines(["*gds1 + RL joins S with ohm*"])
    result.stdout.no_fnmatch_line("*Traceback*")


def test_a_stage_without_claims_is_no_test(pytester: pytest.Pytester) -> None:
    write(pytester.path, NETWORK)
    assert pytester.runpytest_inprocess("--stage-claims").ret == pytest.ExitCode.NO_TESTS_COLLECTED


def test_warnings_as_errors_change_nothing(run: pytest.Pytester) -> None:
    run.runpytest_subprocess("--stage-claims", "-W", "error").assert_outcomes(passed=1, failed=1)


def test_claims_of_a_file_are_judged_once(run: pytest.Pytester) -> None:
    run.makeconftest(
        """
        import symamp.testing.collecting as collecting

        judge = collecting.make_check

        def counted(*arguments, **options):
            print("judged")
            return judge(*arguments, **options)

        collecting.make_check = counted
        """
    )
    result = run.runpytest_subprocess("--stage-claims", "-s", "-q")
    assert result.stdout.str().count("judged") == 1


def test_counterexamples_of_hypothesis_read_as_a_bias(run: pytest.Pytester) -> None:
    run.makepyfile(
        """
        from hypothesis import given, settings
        from symamp.testing import bias_points

        @settings(database=None, derandomize=True)
        @given(point=bias_points("amplifier.stage.toml"))
        def test_low(point):
            assert point["gm1"] < 6e-3
        """
    )
    result = run.runpytest_inprocess()
    result.stdout.fnmatch_lines(["*point=gm1 = * mS, gds1 = 210 uS, RL = 1.2 kohm, CL = 3.3 pF*"])


@pytest.mark.parametrize("module", ["symamp.testing", "symamp.testing.plugin"])
def test_what_every_run_of_pytest_imports_is_light(module: str) -> None:
    code = f"import {module}, sys; print(sorted(m for m in sys.modules if m.split('.')[0] in {HEAVY!r}))"
    found = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert found.stdout.strip() == "[]"


HEAVY = ("numpy", "flint", "hypothesis", "sympy", "scipy", "rich", "mpmath", "tree_sitter")


def test_names_are_told_apart() -> None:
    claims = HOLDS + HOLDS + HOLDS.replace("1 %", "2 %") + POLE + FAILS.replace("-gm1*RL", "-gm1 *\\n  RL")
    stage = parse_stage((NETWORK + claims).encode(), file=None, folder=Path())
    assert item_names(read_claims(stage)) == [
        "gain.dc = -gm1*(ro1 || RL) within 1 %",
        "gain.dc = -gm1*(ro1 || RL) within 1 % (2)",
        "gain.dc = -gm1*(ro1 || RL) within 2 %",
        "gain.p1.hz = 1/(2*pi*(ro1 || RL)*CL)",
        "gain.dc = -gm1 * RL",
    ]


def test_names_of_the_room_are_known_and_lazy() -> None:
    import symamp.testing as room

    assert sorted(room.__all__) == dir(room)
    assert all(getattr(room, name).__doc__ for name in room.__all__)
    with pytest.raises(AttributeError, match="has no attribute 'simulate'"):
        room.simulate  # noqa: B018


def test_without_hypothesis_the_way_out_is_said(tmp_path: Path) -> None:
    (tmp_path / "hypothesis.py").write_text(
        "raise ModuleNotFoundError(name='hypothesis')\n", encoding="utf-8"
    )
    code = "from symamp.testing import assert_derivation; from symamp.testing import bias_points"
    found = subprocess.run(
        [sys.executable, "-c", f"import sys; sys.path.insert(0, {str(tmp_path)!r}); {code}"],
        capture_output=True,
        text=True,
        check=False,
    )
    assert "MissingLibraryError: bias_points needs Hypothesis, which is not installed" in found.stderr


def test_the_recipe_shows_the_test_that_it_runs() -> None:
    folder = Path(__file__).resolve().parents[2] / "recipes" / "keep-a-derivation-true"
    page = (folder / "README.md").read_text(encoding="utf-8")
    (shown,) = page.split("```python\n")[1:]
    assert shown.split("```")[0] == (folder / "test_derivation.py").read_text(encoding="utf-8")
