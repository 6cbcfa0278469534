"""Room `circuit`: formulas that a user writes about a stage, in our grammar or in LaTeX, their names resolved."""

from __future__ import annotations

import re
from collections.abc import Mapping
from functools import cached_property

from symamp.circuit.kinds import BARE_PARAMETERS
from symamp.circuit.latex_names import latex_name
from symamp.circuit.near import propose
from symamp.circuit.stage import Stage
from symamp.errors import ReadError
from symamp.formula import FUNCTIONS, LONGEST, Node, parse_tokens
from symamp.formula_latex import is_latex, scan_latex
from symamp.formula_scan import Token, error_at, scan
from symamp.values import quoted

_MARKUP = re.compile(r"\\(?:mathrm|text)\b|[\\{}\s]")


def read_formula(stage: Stage, text: str) -> Node:
    r"""The tree of a formula in which every name is a symbol or an alias of the stage.

    The text is in our grammar, with the signs of print beside those that are typed (`−gm1·(ro1 ∥ RL)`), or in LaTeX
    (`-g_{m1} (r_{o1} \parallel R_L)`). Raises ReadError, with a caret under the place in the text as written, where
    it cannot be read or a name is unknown.
    """
    if not isinstance(text, str):
        raise ReadError(f"{quoted(text)} is no formula", 'write it as text, such as "-gm1*(ro1 || RL)"')
    if len(text) > LONGEST:
        raise ReadError(f"a formula of {len(text)} characters", f"at most {LONGEST} can be read")
    if "=" in text:
        problem = '"=" has no meaning in a formula'
        raise error_at(text, text.index("=") + 1, problem, "write what stands on its right alone")
    known = _Names(stage)
    if is_latex(text):
        return parse_tokens(text, scan_latex(text, known.of_latex, known.remedy))
    return parse_tokens(text, [_resolved(text, token, known) for token in scan(text)])


def _resolved(text: str, token: Token, known: _Names) -> Token:
    if token.what != "name" or token.text in (*FUNCTIONS, "pi"):
        return token
    name = known.of_word(token.text)
    if name is None:
        problem = f"there is no symbol {quoted(token.text)}"
        raise error_at(text, token.column, problem, known.remedy(token.text))
    return token if name == token.text else Token("name", name, token.column)


class _Names:
    """The names of a stage, as they are and as LaTeX writes them."""

    def __init__(self, stage: Stage) -> None:
        self.stage = stage
        self.names = dict.fromkeys((*stage.symbols, *stage.aliases))

    @cached_property
    def _latex(self) -> Mapping[tuple[str, str], str]:
        """{(letter, subscript): name}; of two that look alike in LaTeX the first."""
        found: dict[tuple[str, str], str] = {}
        for name in self.names:
            found.setdefault(_key(latex_name(name)), name)
        return found

    @cached_property
    def _folded(self) -> Mapping[tuple[str, str], str | None]:
        """The same without upper and lower case, commas and joining signs; None where two names come to one."""
        found: dict[tuple[str, str], str | None] = {}
        for key, name in self._latex.items():
            folded = _folded(key)
            found[folded] = name if folded not in found else None
        return found

    def of_word(self, word: str) -> str | None:
        """A name in our grammar, or as people write its subscript: `g_m1`, `C_L`."""
        if word in self.names:
            return word
        letter, joined, subscript = word.partition("_")
        return self.of_latex(letter, subscript) if joined and letter and subscript else None

    def of_latex(self, letter: str, subscript: str) -> str | None:
        if not subscript:
            if letter in self.names:
                return letter
            return self._latex.get((letter, ""))
        key = (letter, subscript)
        found = self._latex.get(key) or self._folded.get(_folded(key))
        if found is None and f"{letter}_{subscript}" in self.names:
            return f"{letter}_{subscript}"
        return found

    def remedy(self, word: str) -> str:
        """What to say of an unknown name."""
        if word in BARE_PARAMETERS:
            devices = [part.symbol(word) for part in self.stage.parts.values() if part.kind.prefixed]
            own = [name for name in devices if name in self.names]
            if own:
                return f"name one: {', '.join(own[:8])}"
        return propose(word, self.names, "symbols")


def _key(latex: str) -> tuple[str, str]:
    """("g", "m1") of g_{m1}, ("beta", "1") of \\beta_1."""
    base, _, subscript = latex.partition("_")
    return _MARKUP.sub("", base), _MARKUP.sub("", subscript)


def _folded(key: tuple[str, str]) -> tuple[str, str]:
    return key[0].lower(), re.sub(r"[,_\s]", "", key[1]).lower()
