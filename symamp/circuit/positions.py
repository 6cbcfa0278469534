"""Room `circuit`: the line of every key in a TOML text.

`tomllib` gives values without positions; the syntax tree of tree-sitter gives positions. It is built only
when a position is asked for, which is when something is wrong.
"""

from __future__ import annotations

import functools
import tomllib
from typing import Any

Path = tuple[str | int, ...]


def line_of(source: bytes, path: Path) -> int | None:
    """The line, from 1, of the key or array member at a path: ("bias", "M1", "gm"), ("claim", 0, "about").

    Where the path is not in the text, the line of its nearest existing ancestor; None where there is none.
    """
    lines = _lines(source)
    for length in range(len(path), 0, -1):
        if path[:length] in lines:
            return lines[path[:length]]
    return None


@functools.lru_cache(maxsize=4)
def _lines(source: bytes) -> dict[Path, int]:
    import tree_sitter
    import tree_sitter_toml

    parser = tree_sitter.Parser(tree_sitter.Language(tree_sitter_toml.language()))
    lines: dict[Path, int] = {}
    counts: dict[Path, int] = {}
    for node in parser.parse(source).root_node.named_children:
        if node.type == "pair":
            _read_pair(node, (), lines)
        elif node.type in ("table", "table_array_element"):
            _read_table(node, lines, counts)
    return lines


def _read_table(node: Any, lines: dict[Path, int], counts: dict[Path, int]) -> None:
    header, *pairs = [child for child in node.named_children if child.type != "comment"]
    path: Path = ()
    keys = _keys(header)
    for depth, key in enumerate(keys):
        path = (*path, key)
        lines.setdefault(path, _line(header))
        if node.type == "table_array_element" and depth == len(keys) - 1:
            counts[path] = counts.get(path, -1) + 1
        if path in counts:  # a table below an array of tables belongs to its last member
            path = (*path, counts[path])
            lines.setdefault(path, _line(header))
    for pair in pairs:
        if pair.type == "pair":
            _read_pair(pair, path, lines)


def _read_pair(node: Any, above: Path, lines: dict[Path, int]) -> None:
    """A pair and all that its value holds, without recursion: values may be nested deeply."""
    waiting = [(node, above)]
    while waiting:
        pair, path = waiting.pop()
        if pair.type == "pair":
            key, *value = [child for child in pair.named_children if child.type != "comment"]
            for name in _keys(key):
                path = (*path, name)
                lines.setdefault(path, _line(key))
            pair = value[0] if value else key
        if pair.type == "inline_table":
            waiting += [(child, path) for child in pair.named_children if child.type == "pair"]
        elif pair.type == "array":
            members = [child for child in pair.named_children if child.type != "comment"]
            for index, child in enumerate(members):
                lines.setdefault((*path, index), _line(child))
                waiting.append((child, (*path, index)))


def _keys(node: Any) -> list[str]:
    """The names that a bare, quoted or dotted key holds, in order."""
    if node.type == "dotted_key":
        return [name for child in node.named_children for name in _keys(child)]
    text = node.text.decode("utf-8", "replace")
    if node.type != "quoted_key":
        return [text]
    try:
        return list(tomllib.loads(f"{text} = 0"))
    except tomllib.TOMLDecodeError:
        return [text]


def _line(node: Any) -> int:
    return int(node.start_point[0]) + 1
