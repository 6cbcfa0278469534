r"""Formulas as people paste them from LaTeX, scanned into the same words and signs: below all rooms of the house.

`-g_{m1} r_{o1}`, `\frac{g_{m1}}{C_L}`, `r_{o1} \parallel R_L`: what stands side by side is a product. Every word keeps
the column at which it stands in the text as pasted.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass

from symamp.errors import ReadError
from symamp.formula_scan import Token, error_at, named, number_token
from symamp.values import quoted

Resolve = Callable[[str, str], "str | None"]  # a letter and its subscript -> the name of a symbol
Remedy = Callable[[str], str]  # an unknown name as written -> what to propose

_DEEPEST = 64  # groups within one another
_OPERATORS = {
    "cdot": "*", "times": "*", "ast": "*", "div": "/", "parallel": "||", "|": "||", "Vert": "||", "pm": "", "mp": "",
}  # fmt: skip
_SKIPPED = {
    ",", ";", ":", "!", " ", "quad", "qquad", "thinspace", "left", "right", "big", "Big", "bigg", "Bigg", "bigl",
    "bigr", "Bigl", "Bigr", "biggl", "biggr", "Biggl", "Biggr", "displaystyle", "textstyle", "limits", "nolimits", "\\",
    "(", ")", "[", "]", "mathstrut", "strut", "allowbreak",
}  # fmt: skip
_FRACTIONS = {"frac", "dfrac", "tfrac", "cfrac"}
_WORDS = {
    "mathrm",
    "text",
    "textrm",
    "mathit",
    "operatorname",
    "mathsf",
    "mathbf",
    "rm",
    "textit",
    "mbox",
    "mathnormal",
}
_GREEK = {
    "alpha", "beta", "gamma", "delta", "mu", "pi", "lambda", "rho", "sigma", "tau", "omega", "Omega", "eta", "theta",
    "chi", "phi", "varphi", "kappa", "nu", "xi", "zeta", "epsilon", "varepsilon",
}  # fmt: skip
_BARS = {"lvert": True, "rvert": False}
_NUMBER = re.compile(r"(?:[0-9]+(?:\.[0-9]*)?|\.[0-9]+)(?:[eE][+-]?[0-9]+)?")
_COMMAND = re.compile(r"\\([A-Za-z]+|.)", re.DOTALL)
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9]*")
_SIGNS = {"+": "+", "-": "-", "−": "-", "*": "*", "/": "/", "·": "*", "×": "*", "∥": "||"}


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
class _Open:
    """What a closing sign must close: its sign, and where it was opened."""

    closing: str
    column: int


class _Scanner:
    def __init__(self, text: str, resolve: Resolve, remedy: Remedy) -> None:
        self.text, self.resolve, self.remedy = text, resolve, remedy
        self.at = 0
        self.depth = 0
        self.tokens: list[Token] = []

    def whole(self) -> list[Token]:
        self.group(None)
        self.tokens.append(Token("end", "", len(self.text) + 1))
        return self.tokens

    # Tokens

    def put(self, what: str, text: str, column: int) -> None:
        """A word or sign; side by side is a product."""
        starts = what in ("name", "number") or text == "("
        last = self.tokens[-1] if self.tokens else None
        if starts and last is not None and self._ends(last):
            self.tokens.append(Token("op", "*", column))
        self.tokens.append(Token(what, text, column))

    @staticmethod
    def _ends(last: Token) -> bool:
        if last.what == "name":
            return last.text not in ("sqrt", "abs")
        return last.what == "number" or last.text == ")"

    def put_number(self, token: Token) -> None:
        self.put("number", token.text, token.column)
        self.tokens[-1] = token

    def error(self, column: int, problem: str, remedy: str = "") -> ReadError:
        return error_at(self.text, column, problem, remedy)

    # Reading

    def group(self, opened: _Open | None) -> None:
        """All up to the sign that closes the group, or to the end of the text."""
        self.depth += 1
        if self.depth > _DEEPEST:
            raise self.error(self.at + 1, f"more than {_DEEPEST} groups within one another")
        while self.at < len(self.text):
            character = self.text[self.at]
            if opened is not None and self._closes(opened):
                self.depth -= 1
                return
            if character in "}" or (character == "]" and opened is None):
                raise self.error(self.at + 1, f"{character} closes what was not opened", "remove it")
            self.piece(character)
        if opened is not None:
            raise self.error(opened.column, "this group is not closed", f"add {opened.closing}")
        self.depth -= 1

    def _closes(self, opened: _Open) -> bool:
        """Whether the group's end stands here; it is passed over."""
        for closing in (opened.closing, f"\\right{opened.closing}", f"\\right {opened.closing}"):
            if self.text.startswith(closing, self.at):
                self.at += len(closing)
                return True
        if opened.closing == "|" and self.text.startswith("\\rvert", self.at):
            self.at += len("\\rvert")
            return True
        return False

    def piece(self, character: str) -> None:
        column = self.at + 1
        if character.isspace() or character in "$~&":
            self.at += 1
        elif character == "\\":
            self.command()
        elif character == "{":
            self.at += 1
            self.bracketed("}", column)
        elif character in "([":
            self.at += 1
            self.bracketed(")" if character == "(" else "]", column)
        elif character == "|":
            self.bar(column)
        elif character == "^":
            self.raised(column)
        elif (character.isdigit() and character.isascii()) or character == ".":
            self.number(column)
        elif character in _SIGNS:
            self.at += 1
            self.sign(_SIGNS[character], column)
        elif character.isascii() and character.isalpha():
            self.symbol(column)
        else:
            raise self.error(column, f"{named(character)} has no meaning in a formula")

    def sign(self, sign: str, column: int) -> None:
        """An operator; `**` and `//` are read as one."""
        if sign in "*/" and self.text[self.at : self.at + 1] == sign:
            self.at += 1
            self.tokens.append(Token("op", "^" if sign == "*" else "||", column))
            return
        self.tokens.append(Token("op", sign, column))

    def bracketed(self, closing: str, column: int) -> None:
        self.put("op", "(", column)
        self.group(_Open(closing, column))
        self.tokens.append(Token("op", ")", self.at))

    def bar(self, column: int) -> None:
        """`||` is parallel; a single bar begins a size."""
        if self.text.startswith("||", self.at):
            self.at += 2
            self.tokens.append(Token("op", "||", column))
            return
        self.at += 1
        self.size(column)

    def size(self, column: int) -> None:
        self.put("name", "abs", column)
        self.tokens.append(Token("op", "(", column))
        self.group(_Open("|", column))
        self.tokens.append(Token("op", ")", self.at))

    def raised(self, column: int) -> None:
        self.at += 1
        self.tokens.append(Token("op", "^", column))
        self.argument(column, "an exponent")

    def argument(self, column: int, what: str) -> None:
        """A group in braces, or the one sign that follows, in brackets."""
        self._skip_spaces()
        if self.at >= len(self.text):
            raise self.error(column, f"{what} is missing")
        here = self.at + 1
        self.tokens.append(Token("op", "(", here))
        if self.text[self.at] == "{":
            self.at += 1
            self.group(_Open("}", here))
        elif self.text[self.at].isdigit():
            self.put_number(number_token(self.text, here, self.text[self.at], "", here))
            self.at += 1
        else:
            self.piece(self.text[self.at])
        self.tokens.append(Token("op", ")", self.at))

    def _skip_spaces(self) -> None:
        while self.at < len(self.text) and self.text[self.at].isspace():
            self.at += 1

    def number(self, column: int) -> None:
        match = _NUMBER.match(self.text, self.at)
        if match is None:
            raise self.error(column, f"{quoted(self.text[self.at])} has no meaning in a formula")
        self.at = match.end()
        unit, place = self._unit()
        self.put_number(number_token(self.text, column, match[0], unit, place))

    def _unit(self) -> tuple[str, int]:
        r"""Prefix and unit after a number, in upright letters: `\,\mathrm{k}\Omega`, `\,\text{pF}`."""
        unit, place, end = "", self.at + 1, self.at
        position = self.at
        while position < len(self.text):
            space = re.compile(r"[\s~]+|\\[,;:! ]|\\(?:thinspace|quad)(?![A-Za-z])").match(
                self.text, position
            )
            if space:
                position = space.end()
                continue
            found = re.compile(
                rf"\\(?:{'|'.join(sorted(_WORDS))})\s*\{{\s*([A-Za-z/°]*)\s*\}}|\\(Omega|mu|degree)(?![A-Za-z])"
            ).match(self.text, position)
            if found is None:
                break
            place = place if unit else position + 1
            unit += {"Omega": "ohm", "mu": "u", "degree": "°", None: found[1]}[found[2]]
            position = end = found.end()
        self.at = end
        return unit, place

    def symbol(self, column: int) -> None:
        """A letter with its subscript, or a name in our own grammar."""
        match = _WORD.match(self.text, self.at)
        assert match is not None
        word = match[0]
        after = self.text[match.end() : match.end() + 1]
        if word in ("sqrt", "abs", "pi") and self.resolve(word, "") is None:
            self.at = match.end()
            self.put("name", word, column)
        elif after != "_" and self.resolve(word, "") is not None:
            self.at = match.end()
            self.put("name", str(self.resolve(word, "")), column)
        elif len(word) > 1 and after == "_" and self.resolve(word, "") is None:
            # gm_tail, or a letter before one with a subscript
            if not self._whole_name(word, column):
                self._letter(word[0], column)
        else:
            self._letter(word[0] if after == "_" and len(word) == 1 else word, column)

    def _whole_name(self, word: str, column: int) -> bool:
        found = re.compile(r"[A-Za-z][A-Za-z0-9_]*").match(self.text, self.at)
        if found is None or self.resolve(found[0], "") is None:
            return False
        self.at = found.end()
        self.put("name", str(self.resolve(found[0], "")), column)
        return True

    def _letter(self, letter: str, column: int) -> None:
        self.at += len(letter)
        self.named(letter, letter, column)

    def named(self, letter: str, shown: str, column: int) -> None:
        """The symbol of a letter and the subscript that follows it."""
        start = column - 1
        subscript = self.subscript()
        name = self.resolve(letter, subscript)
        if name is None:
            written = self.text[start : self.at].strip() or shown
            raise self.error(column, f"there is no symbol {quoted(written)}", self.remedy(letter + subscript))
        self.put("name", name, column)

    def subscript(self) -> str:
        """The subscript, without braces, spaces and fonts; "" for none."""
        self._skip_spaces()
        if not self.text.startswith("_", self.at):
            return ""
        self.at += 1
        self._skip_spaces()
        if self.text.startswith("{", self.at):
            return self._braced()
        if self.text.startswith("\\", self.at):
            return self._flat_command()
        found = self.text[self.at : self.at + 1]
        self.at += 1
        return found

    def _braced(self) -> str:
        opened, found = self.at + 1, ""
        self.depth += 1
        if self.depth > _DEEPEST:
            raise self.error(opened, f"more than {_DEEPEST} groups within one another")
        self.at += 1
        while self.at < len(self.text):
            character = self.text[self.at]
            if character == "}":
                self.at += 1
                self.depth -= 1
                return found
            if character == "{":
                found += self._braced()
            elif character == "\\":
                found += self._flat_command()
            else:
                self.at += 1
                found += "" if character.isspace() or character == "_" else character
        raise self.error(opened, "this subscript is not closed", "add }")

    def _flat_command(self) -> str:
        match = _COMMAND.match(self.text, self.at)
        if match is None:
            raise self.error(self.at + 1, "a command is missing after the backslash")
        self.at = match.end()
        word = match[1]
        if word in _GREEK:
            return word
        return "" if word in _WORDS or word in _SKIPPED else "_" if word == "_" else word

    def command(self) -> None:
        column = self.at + 1
        match = _COMMAND.match(self.text, self.at)
        if match is None:
            raise self.error(column, "a command is missing after the backslash")
        word = match[1]
        self.at = match.end()
        if word in _SKIPPED:
            return
        if word in _FRACTIONS:
            self.fraction(column)
        elif word == "sqrt":
            self.put("name", "sqrt", column)
            self.argument(column, "what stands under the root")
        elif _OPERATORS.get(word):
            self.tokens.append(Token("op", _OPERATORS[word], column))
        elif word in ("lvert", "vert"):
            self.size(column)
        elif (
            word == "pi"
            and self.resolve("pi", "") is None
            and not self.text[self.at :].lstrip().startswith("_")
        ):
            self.put("name", "pi", column)
        elif word in _GREEK:
            self.named(word, "\\" + word, column)
        elif word in _WORDS:
            self.upright(column)
        else:
            raise self.error(
                column, f"\\{word} has no meaning in a formula here", "write it with + - * / and brackets"
            )

    def fraction(self, column: int) -> None:
        self.put("op", "(", column)
        self.argument(column, "what stands above the bar")
        self.tokens.append(Token("op", "/", column))
        self.argument(column, "what stands below the bar")
        self.tokens.append(Token("op", ")", column))

    def upright(self, column: int) -> None:
        r"""A name in upright letters: `\mathrm{CL}`, `\mathrm{g}_{m1}`."""
        self._skip_spaces()
        if not self.text.startswith("{", self.at):
            raise self.error(column, "a group in braces is missing after this command")
        word = self._braced()
        if word in ("sqrt", "abs", "pi") and self.resolve(word, "") is None:
            self.put("name", word, column)
        else:
            self.named(word, word, column)
