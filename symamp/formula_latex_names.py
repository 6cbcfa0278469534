r"""The names of symbols as LaTeX writes them, `g_{m1}`, `C_\text{L}`, `\beta_3`: below all rooms of the house."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from symamp.errors import ReadError
from symamp.formula_scan import UPRIGHT, error_at, named
from symamp.values import quoted

Resolve = Callable[[str, str], "str | None"]  # a letter and its subscript -> the name of a symbol
Remedy = Callable[[str], str]  # an unknown name as written -> what to propose

GREEK_LETTERS = {"π": "pi", "β": "beta", "μ": "mu", "µ": "mu"}
SPACES = {
    ",", ";", ":", "!", " ", "quad", "qquad", "thinspace", "left", "right", "big", "Big", "bigg", "Bigg", "bigl",
    "bigr", "Bigl", "Bigr", "biggl", "biggr", "Biggl", "Biggr", "displaystyle", "textstyle", "limits", "nolimits", "\\",
    "(", ")", "[", "]", "mathstrut", "strut", "allowbreak", "rm", "notag", "nonumber",
}  # fmt: skip
WORD = re.compile(r"[A-Za-z][A-Za-z0-9]*")
DEEPEST = 64  # groups within one another

_COMMAND = re.compile(r"\\([A-Za-z]+|.)", re.DOTALL)
_LONG_NAME = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_BARE_SUBSCRIPT = re.compile(r"[A-Za-z]_([A-Za-z0-9]+)")
_LONGEST_SUBSCRIPT = 40  # letters of one that has no braces


class NameReader:
    """A place in a text, and the names that begin there; the place moves on past what is read."""

    def __init__(self, text: str, resolve: Resolve, remedy: Remedy) -> None:
        self.text, self.resolve, self.remedy = text, resolve, remedy
        self.at = 0
        self.depth = 0

    def error(self, column: int, problem: str, remedy: str = "") -> ReadError:
        return error_at(self.text, column, problem, remedy)

    @contextmanager
    def deeper(self, column: int) -> Iterator[None]:
        if self.depth > DEEPEST:
            raise self.error(column, f"more than {DEEPEST} groups within one another")
        self.depth += 1
        yield
        self.depth -= 1

    def skip_spaces(self) -> None:
        while self.at < len(self.text) and self.text[self.at].isspace():
            self.at += 1

    def command_word(self) -> str:
        """What follows a backslash: letters, or one sign."""
        match = _COMMAND.match(self.text, self.at)
        if match is None:
            raise self.error(self.at + 1, "a command is missing after the backslash")
        self.at = match.end()
        return match[1]

    def symbol(self, column: int) -> str:
        """A letter with its subscript, or a name in our own grammar."""
        match = WORD.match(self.text, self.at)
        assert match is not None
        word = match[0]
        if not self.text.startswith("_", match.end()):
            self.at = match.end()
            return self.named(word, word, column)
        long = _LONG_NAME.match(self.text, self.at)
        if len(word) > 1 and long is not None and self.resolve(long[0], "") is not None:  # gm_tail
            self.at = long.end()
            return str(self.resolve(long[0], ""))
        if len(word) > 1 and self.resolve(word[:-1], "") is not None:  # s C_L without the space
            self.at += len(word) - 1
            return str(self.resolve(word[:-1], ""))
        found = self.bare_subscript(column)
        if found is None:
            self.at = match.end()
            found = self.named(word, word, column)
        return found

    def bare_subscript(self, column: int) -> str | None:
        """`R_L`, and `g_m1` where there is no g_m; None where no such subscript is there."""
        found = _BARE_SUBSCRIPT.match(self.text, self.at)
        if found is None:
            return None
        letter, written = found[0][0], found[1]
        if self.resolve(letter, written[0]) is not None:
            if written[1:2].isdigit():
                whole = f"{letter}_{written}"
                remedy = f"put the subscript in braces, such as {letter}_{{{written}}}"
                raise self.error(column, f"{quoted(whole)} reads two ways", remedy)
            longest = 1
        else:
            ends = (
                n
                for n in range(min(len(written), _LONGEST_SUBSCRIPT), 1, -1)
                if not written[n : n + 1].isdigit()
            )
            longest = next((n for n in ends if self.resolve(letter, written[:n]) is not None), 0)
        if not longest:
            raise self.unknown(found[0], letter + written, column)
        self.at += 2 + longest
        return str(self.resolve(letter, written[:longest]))

    def named(self, letter: str, shown: str, column: int) -> str:
        """The symbol of a letter or word and the subscript that follows it; sqrt, abs and pi are what they are."""
        subscript = self.subscript()
        name = self.resolve(letter, subscript)
        if name is None and letter in ("sqrt", "abs", "pi") and not subscript:
            name = letter
        if name is None:
            written = self.text[column - 1 : self.at].strip() or shown
            raise self.unknown(written, letter + subscript, column)
        return name

    def unknown(self, written: str, name: str, column: int) -> ReadError:
        return self.error(column, f"there is no symbol {quoted(written)}", self.remedy(name))

    def subscript(self) -> str:
        """The subscript, without braces, spaces and fonts; "" for none."""
        start = self.at
        self.skip_spaces()
        if not self.text.startswith("_", self.at):
            self.at = start
            return ""
        self.at += 1
        self.skip_spaces()
        if self.text.startswith("{", self.at):
            return self.braced()
        if self.text.startswith("\\", self.at):
            return self.flat_command()
        found = self.letter(self.text[self.at : self.at + 1], self.at + 1)
        self.at += 1
        return found

    def braced(self) -> str:
        """What stands in braces within a name, without spaces and fonts."""
        opened, found = self.at + 1, ""
        self.at += 1
        with self.deeper(opened):
            while self.at < len(self.text):
                character = self.text[self.at]
                if character == "}":
                    self.at += 1
                    return found
                if character == "{":
                    found += self.braced()
                elif character == "\\":
                    found += self.flat_command()
                else:
                    found += self.letter(character, self.at + 1)
                    self.at += 1
        raise self.error(opened, "this subscript is not closed", "add }")

    def letter(self, character: str, column: int) -> str:
        """A letter of a name; one that only looks like an ASCII letter is refused by its code."""
        if character.isspace() or character == "_":
            return ""
        if not character.isascii() and character not in GREEK_LETTERS:
            problem = f"{named(character)} is no ASCII letter"
            raise self.error(column, problem, "names are of ASCII letters")
        return GREEK_LETTERS.get(character, character)

    def flat_command(self) -> str:
        word = self.command_word()
        if word in UPRIGHT:
            self.skip_spaces()
            return self.braced() if self.text.startswith("{", self.at) else ""
        if word in SPACES or word == "_":
            return ""
        return word if len(word) > 1 else self.letter(word, self.at)

    def upright(self, column: int) -> str:
        r"""A name in upright letters: `\mathrm{CL}`, `\mathrm{g}_{m1}`."""
        self.skip_spaces()
        if not self.text.startswith("{", self.at):
            raise self.error(column, "a group in braces is missing after this command")
        word = self.braced()
        return self.named(word, word, column)
