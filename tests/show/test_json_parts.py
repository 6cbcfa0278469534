"""The JSON of `derive` and `ledger`: the keys of the design, strict, and a why beside every null."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from shown import ASSUMPTIONS, CASCODE, SPAN, answer, run, saved, walk

from symamp.exact import derive as derive_module
from symamp.formula import parse

COUPLED = """\
title = "Everything that can be missing"

[mosfet]
M1 = { gate = "g", drain = "out", source = "gnd" }

[capacitor]
CB = ["in", "g"]
CL = ["out", "gnd"]

[resistor]
RB = ["g", "gnd"]
RD = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }
into = { from = "VIN", to = "VIN" }

[bias]
M1 = { gm = "2 mS", gds = "0.1 mS", cgs = "0.1 pF", cgd = "20 fF" }
RB = "1 Mohm"
RD = "5 kohm"
CB = "1 nF"
CL = "1 pF"

[[assumption]]
name = "CB is a short"
short = ["CB"]

[[assumption]]
name = "no load"
neglect = ["CL"]
"""

RESISTIVE = """\
title = "Gain that grows without bound"

[mosfet]
M1 = { gate = "in", drain = "out", source = "gnd" }

[resistor]
RL = ["out", "gnd"]

[voltage_source]
VIN = ["in", "gnd"]

[response]
gain = { from = "VIN", to = "out" }

[bias]
M1 = { gm = "1 mS", gds = "0.1 mS" }
RL = "10 kohm"
"""

EVERY = {"stage", "symbols", "warnings", "remarks"}
RESPONSE = {"unit", "form", "terms", "numerator", "denominator"}
RESPONSE |= {"quantities", "poles", "zeros", "time_constants"}
ACCOUNT = {"unit", "exact", "approximate", "formula_exact", "formula_approximate", "error", "error_formula"}
ACCOUNT |= {"measure", "lost", "new", "assumptions", "span"}
FIGURES = {"alone", "added", "last", "share"}
OVER = {"min", "max", "where_min", "where_max", "proved", "method"}
WHERE = ("where_min", "where_max")


def objects(tmp_path: Path) -> dict[str, Any]:
    """What the two commands answer for stages in which something is missing at every turn."""
    (tmp_path / "t.csv").write_text("gm1 [mS],CL [pF]\n1,1\n8,2\n")
    table = '\n[span]\ntable = "t.csv"\n'
    without_bias = CASCODE[: CASCODE.index("[bias]")]
    found = {}
    for name, texts in {
        "cascode": (CASCODE, ASSUMPTIONS),
        "span": (CASCODE, SPAN, ASSUMPTIONS),
        "table": (CASCODE, table, ASSUMPTIONS),
        "coupled": (COUPLED,),
        "no bias": (without_bias, ASSUMPTIONS),
        "partial bias": (CASCODE.replace('CL = "3.3 pF"', ""), ASSUMPTIONS),
        "nothing left": (RESISTIVE, '\n[[assumption]]\nname = "no load"\nneglect = ["gds"]\nopen = ["RL"]\n'),
    }.items():
        path = saved(tmp_path, *texts)
        found[f"{name} derive"] = answer("derive", path, "--at", "1 MHz", "--at", "0 Hz")
        found[f"{name} assume"] = answer("derive", path, "--assume", "all", "--at", "1 MHz")
        if "bias" not in name:
            found[f"{name} ledger"] = answer("ledger", path, "--points", "16")
    return found


@pytest.fixture(scope="module")
def answers(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Any]:
    return objects(tmp_path_factory.mktemp("stages"))


def unexplained(found: Any) -> list[str]:
    """Places of nulls with no why. One stands beside a null in the same object: `why_KEY`, or `why`, which is a text
    for all nulls of its object or an object with a text for each key. LaTeX is missing where the formula is."""
    places = []
    for place, parent, key in walk(found):
        if parent[key] is not None:
            continue
        named = "why_formula" if key == "latex" else f"why_{key}"
        whys = [parent.get(named), parent.get("why")] if isinstance(parent, dict) else []
        words = [why.get(key) if isinstance(why, dict) else why for why in whys if why]
        if not any(isinstance(w, str) and w for w in words):
            places.append(place)
    return places


def test_every_null_has_a_why_beside_it(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        assert unexplained(found) == [], name


def test_every_why_says_something(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        for place, parent, key in walk(found):
            if str(key).startswith("why"):
                words = parent[key].values() if isinstance(parent[key], dict) else [parent[key]]
                assert all(isinstance(w, str) and len(w) > 5 and not w.endswith(": ") for w in words), (
                    name,
                    place,
                )


def test_every_object_has_stage_symbols_warnings_and_remarks(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        assert set(found) >= EVERY, name
        for symbol in found["symbols"].values():
            assert set(symbol) >= {"value", "unit"}
        assert all(isinstance(text, str) for text in found["warnings"] + found["remarks"])
    symbols = answers["cascode derive"]["symbols"]
    assert symbols["CL"] == {"value": 3.3e-12, "unit": "F"}
    assert list(symbols) == ["gm1", "gds1", "gm2", "gds2", "gmb2", "csb2", "CL"]


def test_derive_has_the_keys_of_the_design(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        for response in found.get("responses", {}).values():
            assert set(response) >= RESPONSE, name
            assert response["form"] in ("expanded", "nested")
            for quantity in response["quantities"].values():
                assert set(quantity) >= {"formula", "latex", "value", "unit"}
            for constant in response["time_constants"]:
                assert set(constant) >= {"part", "resistance", "seconds", "share"}
            if "assume" in name:
                assert isinstance(response["dropped"], list)
                for dropped in response["dropped"]:
                    assert set(dropped) >= {"coefficient", "term", "against", "ratio"}
                kept = [(item["coefficient"], item["term"]) for item in response["kept"]]
                assert {(item["coefficient"], item["against"]) for item in response["dropped"]} <= set(kept)


def test_ledger_has_the_keys_of_the_design(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        for quantity, account in found.get("quantities", {}).items():
            assert set(account) >= ACCOUNT, name
            assert account["measure"] in ("signed", "modulus")
            for share in account["assumptions"]:
                assert set(share) >= {"name", "span"} | FIGURES
                for figure in FIGURES if share["span"] else ():
                    assert share["span"][figure] is None or set(share["span"][figure]) >= OVER, quantity
            if account["span"]:
                assert set(account["span"]["error"]) >= OVER | {"points", "seed"}


def test_what_is_sampled_is_never_called_proved(answers: dict[str, Any]) -> None:
    for found in answers.values():
        for _, parent, key in walk(found):
            if key == "proved":
                method = parent["method"]
                assert parent[key] is method.startswith("proved")
                assert "sampled" in method or "every row" in method or parent[key]
                if parent[key]:
                    low, high = parent["bounds"]
                    assert low <= parent["min"] <= parent["max"] <= high


def test_complex_numbers_are_re_and_im(answers: dict[str, Any]) -> None:
    for name, found in answers.items():
        for response in found.get("responses", {}).values():
            for root in (response["poles"] or []) + (response["zeros"] or []):
                assert set(root) == {"re", "im"}, name
                assert all(isinstance(x, float) for x in root.values())


def test_where_names_symbols_of_the_span_or_a_row(answers: dict[str, Any]) -> None:
    for _, parent, key in walk(answers["span ledger"]):
        if key in WHERE:
            assert set(parent[key]) == {"gm1", "gds1", "gds2", "gm2"}
    rows = [parent[key] for _, parent, key in walk(answers["table ledger"]) if key in WHERE]
    assert rows
    assert all(set(row) == {"row"} and row["row"] in (1, 2) for row in rows)


def test_formulas_are_text_in_the_grammar_of_stage_files(answers: dict[str, Any]) -> None:
    count = 0
    for found in answers.values():
        for place, parent, key in walk(found):
            texts = [parent[key]] if str(key).startswith(("formula", "error_formula", "leading")) else []
            if key in ("numerator", "denominator") and parent[key] is not None:
                texts = parent[key]
            if key in ("term", "against"):
                texts = [parent[key]]
            for text in (t for t in texts if t is not None):
                assert "^" not in text, place
                parse(text)
                count += 1
    assert count > 100


def test_the_cascode_in_numbers(answers: dict[str, Any]) -> None:
    gain = answers["cascode derive"]["responses"]["gain"]
    assert gain["quantities"]["dc"]["value"] == pytest.approx(-387.22, abs=0.01)
    assert gain["quantities"]["p1"]["unit"] == "rad/s"
    assert gain["poles"][0]["re"] == pytest.approx(-3.0712e6, rel=1e-3)
    (zero_hz,) = (x for x in gain["at"] if x["hz"] == 0)
    assert zero_hz == {"hz": 0.0, "re": pytest.approx(-387.22, abs=0.01), "im": 0.0}
    dc = answers["cascode ledger"]["quantities"]["gain.dc"]
    assert dc["error"] == pytest.approx(-0.86 / 4.76)
    assert dc["error_formula"] == "-(gmb2 + gds2)/(gm2 + gmb2 + gds2)"
    assert [s["name"] for s in dc["assumptions"]][1:] == ["no body effect", "one pole"]


def test_lost_roots_are_named_with_their_frequency(answers: dict[str, Any]) -> None:
    account = answers["cascode ledger"]["quantities"]["gain.p2"]
    assert account["error"] is None
    assert account["lost"] == [{"name": "p2", "hz": pytest.approx(13.2e9, rel=0.01)}]


def test_an_approximate_response_that_is_not_there_is_null_with_why(answers: dict[str, Any]) -> None:
    gain = answers["nothing left assume"]["responses"]["gain"]
    assert gain["numerator"] is None
    assert "without bound" in gain["why"]
    assert gain["exact"]["form"] == "expanded"


def test_a_nested_response_is_null_where_terms_are_not_written_out(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(derive_module, "EXPAND_LIMIT", 0)
    path = saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS)
    found = answer("derive", path, "--assume", "no body effect", "--at", "1 MHz")
    gain = found["responses"]["gain"]
    assert (gain["form"], gain["numerator"], gain["denominator"]) == ("nested", None, None)
    assert gain["exact"]["quantities"]["dc"]["value"] == pytest.approx(-387.22, abs=0.01)
    assert unexplained(found) == []
    assert unexplained(answer("ledger", path, "--points", "8")) == []


def test_frequencies_are_answered_in_the_order_in_which_they_are_asked(tmp_path: Path) -> None:
    path = saved(tmp_path, CASCODE)
    found = answer("derive", path, "--at", "10 MHz", "--at", "3", "--at", "2k")
    assert [x["hz"] for x in found["responses"]["gain"]["at"]] == [1e7, 3.0, 2e3]


def test_without_at_and_assume_their_keys_are_not_there(tmp_path: Path) -> None:
    found = answer("derive", saved(tmp_path, CASCODE, ASSUMPTIONS))
    assert "at" not in found["responses"]["gain"]
    assert "dropped" not in found["responses"]["gain"]


def test_one_object_and_nothing_else_is_printed(tmp_path: Path) -> None:
    path = saved(tmp_path, CASCODE, SPAN, ASSUMPTIONS)
    for command in (("derive", path), ("ledger", path, "--points", "8"), ("start", "--schema")):
        result = run(*command, *(() if command[0] == "start" else ("--json",)))
        assert result.exit_code == 0
        text = result.stdout
        _, end = json.JSONDecoder().raw_decode(text)
        assert text[end:] == "\n"
        assert result.stderr == ""
