r"""Formulas as people paste them from LaTeX, scanned into the same words and signs: below all rooms of the house.

`-g_{m1} r_{o1}`, `\frac{g_{m1}}{C_L}`, `r_{o1} \parallel R_L`: what stands side by side is a product. Every word keeps
the column at which it stands in the text as pasted. What reads two ways on paper is refused, never guessed at.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

from symamp.errors import ReadError
from symamp.formula_latex_names import GREEK_LETTERS, SPACES, WORD, NameReader, Remedy, Resolve
from symamp.formula_scan import (
    PRINTED,
    RAISED,
    UPRIGHT,
    Token,
    latex_unit,
    named,
    number_token,
    raised_tokens,
)
from symamp.values import quoted

_OPERATORS = {"cdot": "*", "times": "*", "ast": "*", "div": "/", "parallel": "||", "|": "||", "Vert": "||"}
_FRACTIONS = {"frac", "dfrac", "tfrac", "cfrac"}
_GREEK = {
    "alpha", "beta", "gamma", "delta", "mu", "pi", "lambda", "rho", "sigma", "tau", "omega", "Omega", "eta", "theta",
    "chi", "phi", "varphi", "kappa", "nu", "xi", "zeta", "epsilon", "varepsilon",
}  # fmt: skip
_NUMBER = re.compile(r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_ROOT = re.compile(r"\s*\[\s*([1-9][0-9]?)\s*\]")
_DISPLAY = re.compile(r"\{(?:equation|align|aligned|split|gather|gathered|multline|displaymath|math)\*?\}")
_MIXED = re.compile(r"[0-9]+\*\(\([0-9]+\)/\([0-9]+\)\)")  # as 2½ is written: \frac{1}{2} after 2
_SIGNS = {"+": "+", "-": "-", "*": "*", "/": "/", **PRINTED}

_BRACE = re.compile(r"\}")
_ROUND = re.compile(r"\)")
_SQUARE = re.compile(r"\]")
_CURLY = re.compile(r"\\(?:\}|rbrace(?![A-Za-z]))")
_BAR = re.compile(r"\|(?!\|)")
# Where a size ends that began with \left| or \bigl|, and with \lvert or \vert.
_SIZED = re.compile(r"\\(?:right|[bB]igg?r)\s*(?:\||\\r?vert(?![A-Za-z]))")
_VERT = {
    "lvert": (re.compile(r"\\rvert(?![A-Za-z])"), r"\rvert"),
    "vert": (re.compile(r"\\vert(?![A-Za-z])"), r"\vert"),
}
_SIZED_OPENING = re.compile(r"\\(?:left|[bB]igg?l)\s*(?:\||\\l?vert(?![A-Za-z]))")


def is_latex(text: str) -> bool:
    """Whether a formula is written in LaTeX rather than in our grammar."""
    return any(character in text for character in "\\{}$")


def scan_latex(text: str, resolve: Resolve, remedy: Remedy) -> list[Token]:
    """The words and signs of a formula in LaTeX, `end` last, products written out.

    `resolve` gives the symbol of a letter and its subscript (("g", "m1"), ("beta", "1"), or a whole word and ""), None
    where there is none; `remedy` what to say of an unknown one. Raises ReadError with a caret in the text as written.
    """
    return _Scanner(text, resolve, remedy).whole()


@dataclass
class _Group:
    """One group: what closes it and how that is written, where it was opened, and whether a `/` awaits its end."""

    closes: re.Pattern[str] | None
    closing: str
    column: int
    divided: bool = False


class _Scanner(NameReader):
    def __init__(self, text: str, resolve: Resolve, remedy: Remedy) -> None:
        super().__init__(text, resolve, remedy)
        self.groups: list[_Group] = []
        self.tokens: list[Token] = []
        self.broken = False  # whether a new line has begun since the last word or sign

    def whole(self) -> list[Token]:
        self.group(_Group(None, "", 1))
        self.tokens.append(Token("end", "", len(self.text) + 1))
        return self.tokens

    # Tokens

    def put(self, what: str, text: str, column: int) -> None:
        """A word, a number or an opening bracket; side by side is a product."""
        last = self.tokens[-1] if self.tokens else None
        if last is not None and _ends(last):
            if what == "number" and last.what == "number":
                raise self.error(
                    column, "two numbers stand side by side", r"write 10000 without a space, or \cdot"
                )
            if self.broken:
                remedy = r"begin it with an operator, such as \times"
                raise self.error(column, "a new line that begins without an operator reads two ways", remedy)
            if self.groups[-1].divided:
                remedy = r"put brackets around what is divided by, such as a/(b c), or write \cdot"
                raise self.error(column, "a product without a sign after / reads two ways", remedy)
            self.tokens.append(Token("op", "*", column))
        self.broken = False
        self.tokens.append(Token(what, text, column))

    def put_number(self, token: Token) -> None:
        self.put("number", token.text, token.column)
        self.tokens[-1] = token

    def put_operator(self, sign: str, column: int) -> None:
        self.broken = False
        joins = bool(self.tokens) and _ends(self.tokens[-1])
        if sign == "/":
            self.groups[-1].divided = True
        elif joins:  # a sign before a factor ends no division
            self.groups[-1].divided = False
        self.tokens.append(Token("op", sign, column))

    # Groups

    @contextmanager
    def within(self, group: _Group) -> Iterator[None]:
        with self.deeper(group.column):
            self.groups.append(group)
            yield
            self.groups.pop()

    def group(self, opened: _Group) -> None:
        """All up to the sign that closes the group, or to the end of the text."""
        with self.within(opened):
            while self.at < len(self.text):
                found = opened.closes.match(self.text, self.at) if opened.closes is not None else None
                if found is not None:
                    self.at = found.end()
                    return
                self.piece(self.text[self.at])
            if opened.closes is not None:
                raise self.error(opened.column, "this group is not closed", f"add {opened.closing}")

    def bracketed(self, closes: re.Pattern[str], closing: str, column: int) -> None:
        self.put("op", "(", column)
        self.group(_Group(closes, closing, column))
        self.tokens.append(Token("op", ")", self.at))

    def size(self, closes: re.Pattern[str], closing: str, column: int) -> None:
        self.put("name", "abs", column)
        self.bracketed(closes, closing, column)

    # Reading

    def piece(self, character: str) -> None:
        column = self.at + 1
        if character.isspace() or character in "$~&":
            self.at += 1
        elif character == "\\":
            self.command()
        elif character in "{([":
            self.at += 1
            self.opening(character, column)
        elif character in "})]":
            raise self.unopened(character, column)
        elif character == "|":
            self.bar(column)
        elif character == "^":
            self.raised(column)
        elif character in "0123456789.":
            self.number(column)
        elif character in _SIGNS:
            self.at += 1
            self.sign(_SIGNS[character], column)
        elif character.isascii() and character.isalpha():
            self.put("name", self.symbol(column), column)
        else:
            self.printed(character, column)

    def opening(self, character: str, column: int) -> None:
        if character == "{":
            self.skip_spaces()
            if self.text.startswith("}", self.at):  # {} holds nothing but a place
                self.at += 1
            else:
                self.bracketed(_BRACE, "}", column)
        elif character == "(":
            self.bracketed(_ROUND, ")", column)
        else:
            self.bracketed(_SQUARE, "]", column)

    def unopened(self, character: str, column: int) -> ReadError:
        due = self.groups[-1].closing
        remedy = f"add {due} before it" if due else "remove it"
        return self.error(column, f"{character} closes what was not opened", remedy)

    def sign(self, sign: str, column: int) -> None:
        """An operator; `**` and `//` are read as one."""
        if sign in "*/" and self.text[self.at - 1 : self.at + 1] == 2 * sign:
            self.at += 1
            if sign == "/":
                self.put_operator("||", column)
            else:
                self.tokens.append(Token("op", "^", column))
            return
        self.put_operator(sign, column)

    def bar(self, column: int) -> None:
        """`||` is parallel; a single bar begins a size."""
        if not self.text.startswith("||", self.at):
            self.at += 1
            self.size(_BAR, "|", column)
            return
        if self.groups[-1].closes is _BAR:
            remedy = r"write \parallel, or \lvert and \rvert for sizes"
            raise self.error(column, "|| between bars reads two ways", remedy)
        self.at += 2
        self.put_operator("||", column)

    def printed(self, character: str, column: int) -> None:
        """Signs of print that people paste among LaTeX: `π`, `√2`, `²`."""
        high = RAISED.match(self.text, self.at)
        if high is not None:
            self.at = high.end()
            self.tokens.append(Token("op", "^", column))
            self.tokens.extend(raised_tokens(self.text, column, high[0]))
        elif character == "√":
            self.at += 1
            self.put("name", "sqrt", column)
            self.argument(column, "what stands under the root")
        elif character in GREEK_LETTERS:
            self.at += 1
            self.put("name", self.named(GREEK_LETTERS[character], character, column), column)
        else:
            raise self.error(column, f"{named(character)} has no meaning in a formula")

    def raised(self, column: int) -> None:
        base = self.tokens[-1].number if self.tokens else None
        self.at += 1
        self.tokens.append(Token("op", "^", column))
        self.argument(column, "an exponent")
        after = self.text[self.at : self.at + 1]
        if after and after in "0123456789." and self.text[self.at - 1].isdigit():
            raise self.error(column, "an exponent of several digits needs braces", "write it as ^{10}")
        if base is not None:  # 3 \times 10^{-3}\,\mathrm{S}
            unit, place, end = self.unit(self.at)
            if unit:
                self.at = end
                self.put_number(number_token(self.text, place, "1", unit, place))

    def argument(self, column: int, what: str) -> None:
        """A group in braces, or the one sign that follows, in brackets."""
        self.skip_spaces()
        if self.at >= len(self.text):
            raise self.error(column, f"{what} is missing")
        here = self.at + 1
        character = self.text[self.at]
        self.tokens.append(Token("op", "(", here))
        if character == "{":
            self.at += 1
            self.group(_Group(_BRACE, "}", here))
        elif character in "0123456789":
            self.at += 1
            self.tokens.append(number_token(self.text, here, character, "", here))
        else:
            word = WORD.match(self.text, self.at)
            follows = self.text[word.end() : word.end() + 1] if word is not None else ""
            if character not in "\\([" and (word is None or len(word[0]) > 1 or follows == "_"):
                raise self.error(here, f"{what} of several signs needs braces", "write it in { and }")
            with self.within(_Group(None, "", here)):
                self.piece(character)
        self.tokens.append(Token("op", ")", self.at))

    def number(self, column: int) -> None:
        match = _NUMBER.match(self.text, self.at)
        if match is None:
            raise self.error(column, f"{quoted(self.text[self.at])} has no meaning in a formula")
        unit, place, self.at = self.unit(match.end())
        self.put_number(number_token(self.text, column, match[0], unit, place))

    def unit(self, position: int) -> tuple[str, int, int]:
        return latex_unit(self.text, position, lambda word: self.resolve(word, "") is not None)

    # Commands

    def command(self) -> None:
        column = self.at + 1
        sized = _SIZED_OPENING.match(self.text, self.at)
        if sized is not None:
            self.at = sized.end()
            self.size(_SIZED, r"\right|" if "left" in sized[0] else r"\bigr|", column)
            return
        word = self.command_word()
        if word in SPACES:
            self.broken = self.broken or word == "\\"
        elif word in _FRACTIONS:
            self.fraction(column)
        elif word == "sqrt":
            self.root(column)
        elif word in _OPERATORS:
            self.put_operator(_OPERATORS[word], column)
        elif word in _VERT:
            self.size(*_VERT[word], column)
        elif word in ("{", "lbrace"):
            self.bracketed(_CURLY, r"\}", column)
        elif word in _GREEK:
            self.put("name", self.named(word, "\\" + word, column), column)
        elif word in UPRIGHT:
            self.put("name", self.upright(column), column)
        elif not (word in ("begin", "end") and self.display()):
            problem = f"\\{word} has no meaning in a formula here"
            raise self.error(column, problem, "write it with + - * / and brackets")

    def display(self) -> bool:
        """Whether a display's name follows, as in \\begin{equation}; it is passed over."""
        found = _DISPLAY.match(self.text, self.at)
        self.at = found.end() if found is not None else self.at
        return found is not None

    def fraction(self, column: int) -> None:
        first = len(self.tokens)
        self.put("op", "(", column)
        self.argument(column, "what stands above the bar")
        self.tokens.append(Token("op", "/", column))
        self.argument(column, "what stands below the bar")
        self.tokens.append(Token("op", ")", column))
        whole = "".join(token.text for token in self.tokens[max(first - 1, 0) :])
        if first and _MIXED.fullmatch(whole):
            remedy = r"write it as one fraction, or \cdot before it"
            raise self.error(column, "a whole number before a fraction of numbers reads two ways", remedy)

    def root(self, column: int) -> None:
        r"""`\sqrt{x}`; `\sqrt[3]{x}` is x to the power of 1/3."""
        index = _ROOT.match(self.text, self.at)
        if index is None:
            self.put("name", "sqrt", column)
            self.skip_spaces()
            if self.text.startswith("[", self.at):
                raise self.error(
                    self.at + 1, "the index of a root is no whole number", r"such as \sqrt[3]{x}"
                )
            self.argument(column, "what stands under the root")
            return
        self.at = index.end()
        self.put("op", "(", column)
        self.argument(column, "what stands under the root")
        power = (
            ("op", "^"),
            ("op", "("),
            ("number", "1"),
            ("op", "/"),
            ("number", index[1]),
            ("op", ")"),
            ("op", ")"),
        )
        for what, sign in power:
            made = (
                number_token(self.text, column, sign, "", column)
                if what == "number"
                else Token(what, sign, column)
            )
            self.tokens.append(made)


def _ends(last: Token) -> bool:
    """Whether a factor ends with this word or sign."""
    if last.what == "name":
        return last.text not in ("sqrt", "abs")
    return last.what == "number" or last.text == ")"
