"""Where each key and value of a TOML text stands: line and column, counted in characters from 1.

tomllib reads the values and knows no places; the syntax tree of tree-sitter-toml knows the places and no values.
A path is a tuple of keys and of indices into arrays, as one would write it to reach the value in tomllib's result.
"""

from __future__ import annotations

from bisect import bisect_right
from typing import Any

Path = tuple[str | int, ...]


class Positions:
    """Places of one TOML text, found on first need: a worksheet without a fault never pays for them."""

    def __init__(self, source: str):
        self._source = source
        self._bytes = source.encode()
        self._starts: list[int] | None = None
        self._keys: dict[Path, Any] = {}
        self._values: dict[Path, Any] = {}

    def key(self, path: Path) -> tuple[int, int]:
        """Line and column of the key that path ends with; for an array's element, of the element."""
        self._index()
        node = self._keys.get(path) or self._values.get(path)
        return self._spot(node.start_byte) if node is not None else self._outer(path)

    def value(self, path: Path, offset: int | None = None) -> tuple[int, int]:
        """Line and column of the value; with `offset`, of that character inside the string that stands there."""
        self._index()
        node = self._values.get(path)
        if node is None:
            return self.key(path)
        if offset is None or node.type != "string":
            return self._spot(node.start_byte)
        raw = self._bytes[node.start_byte : node.end_byte].decode()
        inside = string_places(raw)
        into = inside[min(offset, len(inside) - 1)]
        return self._spot(node.start_byte + len(raw[:into].encode()))

    def _outer(self, path: Path) -> tuple[int, int]:
        """The place of what encloses a path that is not written out; the whole file begins at 1:1."""
        return self.value(path[:-1]) if len(path) > 1 else (1, 1)

    def _spot(self, at: int) -> tuple[int, int]:
        return spot(self._source, len(self._bytes[:at].decode()), self._line_starts())

    def _line_starts(self) -> list[int]:
        if self._starts is None:
            self._starts = line_starts(self._source)
        return self._starts

    def _index(self) -> None:
        if self._values:
            return
        import tree_sitter
        import tree_sitter_toml

        language = tree_sitter.Language(tree_sitter_toml.language())
        root = tree_sitter.Parser(language).parse(self._bytes).root_node
        self._values[()] = root
        arrays: dict[Path, int] = {}
        for node in root.children:
            if node.type == "pair":
                self._pair((), node)
            elif node.type in ("table", "table_array_element"):
                self._table(node, arrays)

    def _table(self, node: Any, arrays: dict[Path, int]) -> None:
        """[a.b] or [[a.b]] with its pairs; a name of an array of tables stands for its last element."""
        parts = self._key_parts(node.children[1])
        path: Path = ()
        for k, (name, part) in enumerate(parts):
            path = (*path, name)
            self._keys.setdefault(path, part)
            self._values.setdefault(path, part)
            if k == len(parts) - 1 and node.type == "table_array_element":
                arrays[path] = arrays.get(path, -1) + 1
            if path in arrays:
                path = (*path, arrays[path])
                self._keys.setdefault(path, part)
                self._values.setdefault(path, part)
        for child in node.children:
            if child.type == "pair":
                self._pair(path, child)

    def _pair(self, path: Path, node: Any) -> None:
        for name, part in self._key_parts(node.children[0]):
            path = (*path, name)
            self._keys.setdefault(path, part)
            self._values.setdefault(path, part)
        equals = next(k for k, c in enumerate(node.children) if c.type == "=")
        self._value(path, node.children[equals + 1])

    def _value(self, path: Path, node: Any) -> None:
        stack = [(path, node)]
        while stack:
            path, node = stack.pop()
            self._values[path] = node
            if node.type == "array":
                inner = [c for c in node.children if c.is_named and c.type != "comment"]
                stack.extend(((*path, k), c) for k, c in enumerate(inner))
            elif node.type == "inline_table":
                for child in node.children:
                    if child.type == "pair":
                        self._pair(path, child)

    def _key_parts(self, node: Any) -> list[tuple[str, Any]]:
        """The names of a bare, quoted or dotted key, each with its node."""
        if node.type == "dotted_key":
            return [p for c in node.children if c.is_named for p in self._key_parts(c)]
        raw = self._bytes[node.start_byte : node.end_byte].decode()
        return [(_unquoted(raw), node)]


def _unquoted(raw: str) -> str:
    if raw[:1] not in ("'", '"'):
        return raw
    import tomllib

    return str(tomllib.loads(f"k = {raw}")["k"])


def line_starts(source: str) -> list[int]:
    return [0, *(k + 1 for k, c in enumerate(source) if c == "\n")]


def spot(source: str, at: int, starts: list[int] | None = None) -> tuple[int, int]:
    """Line and column, from 1, of character `at`."""
    starts = line_starts(source) if starts is None else starts
    line = bisect_right(starts, at)
    return line, at - starts[line - 1] + 1


def string_places(raw: str) -> list[int]:
    """For each character of a TOML string's value, and for its end, where in its written form it stands."""
    mark = raw[:3] if raw[:3] in ('"""', "'''") else raw[:1]
    at, stop = len(mark), len(raw) - len(mark)
    if len(mark) == 3:
        at += 2 if raw.startswith("\r\n", at) else raw.startswith("\n", at)
    places: list[int] = []
    while at < stop:
        places.append(at)
        if raw[at] == "\\" and mark[0] == '"':
            width, empty = _escape(raw, at)
            if empty:
                places.pop()
            at += width
        else:
            at += 2 if raw.startswith("\r\n", at) else 1
    return [*places, stop]


def _escape(raw: str, at: int) -> tuple[int, bool]:
    """Written width of the escape at `at`, and whether it stands for nothing (a line's end and its indent)."""
    letter = raw[at + 1 : at + 2]
    if letter in ("u", "U"):
        return (6 if letter == "u" else 10), False
    if letter in (" ", "\t", "\n", "\r"):
        rest = raw[at + 1 :]
        return 1 + len(rest) - len(rest.lstrip(" \t\r\n")), True
    return 2, False
