"""Any text for pdflatex (room: show): every character is written in ASCII, so that no encoding stands in the way.

Letters with accents are put together, Greek letters and signs are set in math, and what TeX's usual faces have no
shape for stands as its code point, [U+1F680]: nothing is lost, and nothing stops the run.
"""

from __future__ import annotations

import re
import unicodedata
from collections.abc import Iterator

_SPECIAL = {
    "\\": r"\textbackslash{}", "{": r"\{", "}": r"\}", "$": r"\$", "&": r"\&", "#": r"\#", "%": r"\%", "_": r"\_",
    "^": r"\textasciicircum{}", "~": r"\textasciitilde{}", "<": r"\ensuremath{<}", ">": r"\ensuremath{>}",
    "|": r"\ensuremath{|}", '"': "''", "`": r"\textasciigrave{}", "[": "{[}", "]": "{]}", "*": "{*}",
    "\t": " ", "\n": " ", "\r": " ",
}  # fmt: skip
_SPACES = {"\u00a0": "~", "\u2009": r"\,", "\u202f": r"\,", "\u2007": "~", "\u2028": " ", "\u2029": " "}
_LETTERS = {
    "ß": r"\ss{}", "æ": r"\ae{}", "Æ": r"\AE{}", "œ": r"\oe{}", "Œ": r"\OE{}", "ø": r"\o{}", "Ø": r"\O{}",
    "å": r"\aa{}", "Å": r"\AA{}", "ł": r"\l{}", "Ł": r"\L{}", "ı": r"\i{}", "ẞ": "SS", "đ": "d", "Đ": "D",
    "¡": "!`", "¿": "?`", "§": r"\S{}", "¶": r"\P{}", "©": r"\textcopyright{}", "£": r"\pounds{}", "–": "--",
    "—": "---", "‐": "-", "‑": "-", "‘": "`{}", "’": "'{}", "“": "``{}", "”": "''{}", "„": ",,", "…": r"\dots{}",
    "°": r"\ensuremath{^\circ}", "†": r"\dag{}", "‡": r"\ddag{}", "•": r"\textbullet{}",
}  # fmt: skip
_GREEK = (
    "alpha beta gamma delta epsilon zeta eta theta iota kappa lambda mu nu xi o pi rho varsigma sigma tau upsilon "
    "phi chi psi omega"
)
_CAPITALS = "A B Gamma Delta E Z H Theta I K Lambda M N Xi O Pi P . Sigma T Upsilon Phi X Psi Omega"
_MATH = {
    "−": "-", "±": r"\pm", "∓": r"\mp", "×": r"\times", "÷": r"\div", "·": r"\cdot", "∞": r"\infty", "≈": r"\approx",
    "≤": r"\leq", "≥": r"\geq", "≠": r"\neq", "≪": r"\ll", "≫": r"\gg", "∥": r"\parallel", "∠": r"\angle",
    "→": r"\rightarrow", "←": r"\leftarrow", "↑": r"\uparrow", "↓": r"\downarrow", "↔": r"\leftrightarrow",
    "⇒": r"\Rightarrow", "⇐": r"\Leftarrow", "⇔": r"\Leftrightarrow", "√": r"\surd", "∑": r"\sum", "∫": r"\int",
    "∂": r"\partial", "∈": r"\in", "∝": r"\propto", "¬": r"\neg", "µ": r"\mu", "Ω": r"\Omega", "Å": r"\mathrm{\AA}",
    "ϕ": r"\phi", "ϑ": r"\vartheta", "ϵ": r"\epsilon", "∘": r"\circ", "○": r"\circ", "★": r"\star", "≡": r"\equiv",
    "½": r"\frac12", "¼": r"\frac14", "¾": r"\frac34", "∧": r"\wedge", "∨": r"\vee", "⋅": r"\cdot", "∆": r"\Delta",
}  # fmt: skip
_MATH.update({chr(0x3B1 + k): n if n == "o" else rf"\{n}" for k, n in enumerate(_GREEK.split())})
_MATH.update(
    {
        chr(0x391 + k): rf"\{n}" if len(n) > 1 else rf"\mathrm{{{n}}}"
        for k, n in enumerate(_CAPITALS.split())
        if n != "."
    }
)
_ACCENTS = {
    "\u0300": "`", "\u0301": "'", "\u0302": "^", "\u0303": "~", "\u0304": "=", "\u0306": "u", "\u0307": ".",
    "\u0308": '"', "\u030a": "r", "\u030b": "H", "\u030c": "v", "\u0323": "d", "\u0327": "c", "\u0331": "b",
}  # fmt: skip
_JOINED = "-',"  # two of them would be set as one sign
LONG_WORD = 24  # letters of a word that is not broken; of a longer one so many stay together:
KEPT = 6
_BREAK = r"\allowbreak{}"


def tex_text(text: str) -> str:
    """The text for LaTeX's text mode, in ASCII; long words may be broken."""
    return "".join(_words(_composed(text), code=False))


def tex_code(text: str) -> str:
    """What is typed, in a typewriter face; it may be broken after every sign that is no letter or digit."""
    return rf"\texttt{{{''.join(_words(_composed(text), code=True))}}}"


def seen(text: str) -> str:
    """The text as it is read on the page, in so far as its width depends on it."""
    return "".join(
        f"[U+{ord(c):04X}]" if not c.isascii() and _one(c).startswith("{[}U+") else c for c in _composed(text)
    )


def _words(text: str, *, code: bool) -> Iterator[str]:
    """The characters in LaTeX, with what lies between them."""
    before = ""
    for match in re.finditer(r"\s+|\S+", text):
        word = match[0]
        whole = len(seen(word)) <= LONG_WORD
        for place, character in enumerate(word):
            if character == before and character in _JOINED:
                yield "{}"
            yield _typed(character) if code else _one(character)
            before = character
            sign = code and not (character.isascii() and character.isalnum())
            strange = len(seen(character)) > 1
            if place + 1 < len(word) and (sign or strange or (not whole and place >= KEPT - 1)):
                yield _BREAK


def _typed(character: str) -> str:
    """A character in the typewriter face, which has more signs than the upright one."""
    return rf"\char{ord(character)}{{}}" if character in "\"'<>|" else _one(character)


def _composed(text: str) -> str:
    return unicodedata.normalize("NFC", text)


def _one(character: str) -> str:
    if character in _SPECIAL:
        return _SPECIAL[character]
    if " " <= character <= "~":
        return character
    for table in (_SPACES, _LETTERS):
        if character in table:
            return table[character]
    if character in _MATH:
        return rf"\ensuremath{{{_MATH[character]}}}"
    return _made_up(character)


def _made_up(character: str) -> str:
    """A letter with accents, what looks like a plain character, or the code point."""
    category = unicodedata.category(character)
    if category in ("Cc", "Cf", "Mn", "Me") or character in "\ufe0e\ufe0f":
        return ""  # controls, joiners and marks without a letter have no shape of their own
    if category == "Zs":
        return " "
    parts = unicodedata.normalize("NFD", character)
    if len(parts) > 1 and parts[0].isascii() and all(mark in _ACCENTS for mark in parts[1:]):
        base = (
            {"i": r"\i", "j": r"\j"}.get(parts[0], parts[0])
            if parts[1] not in "\u0327\u0323\u0331"
            else parts[0]
        )
        for mark in parts[1:]:
            base = rf"\{_ACCENTS[mark]}{{{base}}}"
        return base
    plain = unicodedata.normalize("NFKD", character)
    if plain != character and all(" " <= c <= "~" for c in plain):
        inner = "".join(_one(c) for c in plain)
        super_or_sub = unicodedata.decomposition(character).partition(">")[0]
        if super_or_sub == "<super":
            return rf"\textsuperscript{{{inner}}}"
        return rf"\ensuremath{{_{{{inner}}}}}" if super_or_sub == "<sub" else inner
    return rf"{{[}}U+{ord(character):04X}{{]}}"
