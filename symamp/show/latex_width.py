"""How wide a formula in LaTeX is when it is set (room: show), so that it can be broken before it is too wide.

The widths are those of Computer Modern at 10 pt, TeX's usual faces, as TeX itself says them of boxes with one sign
each; spaces round signs are those of D. E. Knuth, The TeXbook, 1984, chapter 18 (from memory). What is not in the
table counts as wide as most capital letters.
"""

from __future__ import annotations

import re

_TOKEN = re.compile(r"\\[A-Za-z]+|\\.|[ \t\n]+|.", re.DOTALL)
_ITALIC = {
    **dict(zip("abcdefghijklm", (529, 429, 433, 521, 466, 597, 513, 576, 345, 469, 552, 318, 878), strict=True)),
    **dict(zip("nopqrstuvwxyz", (600, 485, 503, 482, 479, 469, 361, 573, 521, 743, 572, 526, 509), strict=True)),
    **dict(zip("ABCDEFGHIJKLM", (750, 809, 786, 856, 796, 782, 786, 913, 518, 651, 921, 681, 1080), strict=True)),
    **dict(zip("NOPQRSTUVWXYZ", (913, 791, 781, 791, 767, 671, 723, 792, 806, 1083, 907, 803, 754), strict=True)),
    **dict.fromkeys("0123456789", 500),
    "(": 389, ")": 389, "[": 278, "]": 278, "|": 278, "/": 500, ".": 278, ",": 445, "!": 278,
}  # fmt: skip
_ROMAN = {
    **dict(zip("abcdefghijklm", (500, 556, 445, 556, 445, 306, 500, 556, 278, 306, 528, 278, 834), strict=True)),
    **dict(zip("nopqrstuvwxyz", (556, 500, 556, 528, 392, 395, 389, 556, 528, 723, 528, 528, 445), strict=True)),
    "I": 362, "J": 514, "M": 917, "W": 1028,
    **dict.fromkeys("0123456789/", 500), **dict.fromkeys(".,:;!|'\u2009", 278), **dict.fromkeys(" \u00a0-", 334),
    **dict.fromkeys("()[]", 389), "+": 778, "\u2212": 778, "%": 834, "=": 778,
}  # fmt: skip
_COMMANDS = {
    r"\pi": 606, r"\mu": 603, r"\beta": 619, r"\infty": 1000, r"\Omega": 723, r"\backslash": 500, r"\hat": 0,
    r"\#": 834, r"\$": 500, r"\%": 834, r"\&": 778, r"\_": 360, r"\{": 500, r"\}": 500, r"\omega": 658,
    r"\,": 167, r"\;": 278, r"\ ": 334, r"\!": -167, r"\quad": 1000, r"\qquad": 2000, r"\lvert": 278,
    r"\rvert": 278, r"\circ": 500, r"\dots": 1170, r"\varphi": 654, r"\zeta": 494,
}  # fmt: skip
_OPERATORS = {"+": 778, "-": 778, r"\pm": 778, r"\mp": 778, r"\times": 778, r"\cdot": 278, r"\sim": 778}
_RELATIONS = {"=": 778, r"\approx": 778, r"\ll": 1000, "<": 778, ">": 778, r"\parallel": 500, r"\leq": 778}
_OTHER = 800
_MEDIUM, _THICK = 222, 278  # spaces on either side of an operator, and of a relation
_BAR = 240  # what a fraction's bar stands out
_SURD = 850
_SCRIPT, _SMALLER = 0.815, 0.66  # letters of 7 pt are wider for their size than those of 10 pt
_AFTER_SCRIPT = 50
_STYLES = (1.0, 1.0, _SCRIPT, _SMALLER)  # display, text, script, script of a script


def math_width(latex: str) -> float:
    """The width in em of a formula in display style; braces that do not match are passed over."""
    return _Reader(_TOKEN.findall(latex)).row(0) / 1000


def text_width(text: str) -> float:
    """The width in em of upright text, for columns of tables; letters that the table lacks count as capitals."""
    return sum(_ROMAN.get(character, _OTHER) for character in text) / 1000


class _Reader:
    def __init__(self, tokens: list[str]) -> None:
        self.tokens = tokens
        self.place = 0

    def row(self, style: int) -> float:
        """What stands up to the brace that closes the group, or the end, in thousandths of an em."""
        total, first = 0.0, True
        while self.place < len(self.tokens):
            token = self._take()
            if token == "}":
                break
            if not token.isspace():
                total += self._atom(token, style, first)
                first = token in _RELATIONS or token in (
                    "(",
                    "[",
                )  # what follows these is a sign, not an operator
        return total

    def _take(self) -> str:
        token = self.tokens[self.place]
        self.place += 1
        return token

    def _atom(self, token: str, style: int, first: bool) -> float:
        scale = _STYLES[style]
        if token in ("_", "^"):
            return self._scripts(style)
        if token in (r"\frac", r"\dfrac"):
            inner = min(style + 1, 3)
            return max(self._group(inner), self._group(inner)) + _BAR
        if token == r"\sqrt":
            return self._group(style) + _SURD * scale
        if token in (r"\mathrm", r"\text", r"\mathcal"):
            return self._roman() * scale
        if token == "{":
            return self.row(style)
        if token in _OPERATORS:
            spaces = 0 if style > 1 or first else 2 * _MEDIUM
            return _OPERATORS[token] * scale + spaces
        if token in _RELATIONS:
            return _RELATIONS[token] * scale + (0 if style > 1 else 2 * _THICK)
        return _COMMANDS.get(token, _ITALIC.get(token, _OTHER)) * scale

    def _group(self, style: int) -> float:
        """One argument: a group, or a single sign."""
        while self.place < len(self.tokens) and self.tokens[self.place].isspace():
            self.place += 1
        if self.place >= len(self.tokens):
            return 0.0
        return self._atom(self._take(), style, True)

    def _scripts(self, style: int) -> float:
        """What stands below and above the line: as wide as the wider of both."""
        inner = min(max(style, 1) + 1, 3)
        width = self._group(inner)
        if self.place < len(self.tokens) and self.tokens[self.place] in ("_", "^"):
            self._take()
            width = max(width, self._group(inner))
        return width + _AFTER_SCRIPT

    def _roman(self) -> float:
        """Upright letters up to the closing brace."""
        if self.place >= len(self.tokens):
            return 0.0
        if self._take() != "{":
            return _OTHER
        total = 0.0
        while self.place < len(self.tokens):
            token = self._take()
            if token == "}":
                break
            total += _ROMAN.get(token, _COMMANDS.get(token, _OTHER))
        return total
