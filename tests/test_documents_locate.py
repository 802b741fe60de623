"""Lines of keys, against documents written by hand and a writer that counts its own lines."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from gmid.documents import dotted, locate_keys
from gmid.documents.locate import KeyPath, nearest_line

TRICKY: list[tuple[str, dict[KeyPath, int]]] = [
    ("", {}),
    ("# only a comment = 1", {}),
    ("a = 1\n\n# b = 2\nb = 2 # c = 3", {("a",): 1, ("b",): 4}),
    ("a.b . c = 1\na.d = 2", {("a",): 1, ("a", "b"): 1, ("a", "b", "c"): 1, ("a", "d"): 2}),
    ('"a.b" = 1\n\'c d\' = 2\n"\\u00e9\\"]" = 3', {("a.b",): 1, ("c d",): 2, ('é"]',): 3}),
    ('"" = 1', {("",): 1}),
    ('a = """\n[x]\nb = 1\\"""\n"""\nc = 2', {("a",): 1, ("c",): 5}),
    ("a = '''\n[x] '' \\'''\nc = 2", {("a",): 1, ("c",): 3}),
    ('a = """x"""""\nb = \'\'\'y\'\'\'\'\'\nc = ""\nd = 1', {
        ("a",): 1, ("b",): 2, ("c",): 3, ("d",): 4}),
    ('a = "x # ] } \\" \\\\"\nb = \'# \\\'\nc = 1', {("a",): 1, ("b",): 2, ("c",): 3}),
    ("a = [\n 1, # ]\n\n [2,\n 3],\n]\nb = 1", {
        ("a",): 1, ("a", 0): 2, ("a", 1): 4, ("a", 1, 0): 4, ("a", 1, 1): 5, ("b",): 7}),
    ("a = [ ]\nb = {}\nc = [[], {}]", {
        ("a",): 1, ("b",): 2, ("c",): 3, ("c", 0): 3, ("c", 1): 3}),
    ("a = { b.c = 1, 'd' = [1,\n{ e = \"}\" }] }", {
        ("a",): 1, ("a", "b"): 1, ("a", "b", "c"): 1, ("a", "d"): 1, ("a", "d", 0): 1,
        ("a", "d", 1): 2, ("a", "d", 1, "e"): 2}),
    ("[a.b]\nc = 1\n[a]\nd = 2", {
        ("a",): 3, ("a", "b"): 1, ("a", "b", "c"): 2, ("a", "d"): 4}),
    (" [ a . 'b' ] # [c]\r\nc = 1\r\n", {("a",): 1, ("a", "b"): 1, ("a", "b", "c"): 2}),
    ("[[s]]\n[s.x]\na = 1\n[[s.y]]\nb = 1\n[[s.y]]\n[[s]]\n[[s.y]]\nb = 2\n[s.y.z]", {
        ("s",): 1, ("s", 0): 1, ("s", 0, "x"): 2, ("s", 0, "x", "a"): 3, ("s", 0, "y"): 4,
        ("s", 0, "y", 0): 4, ("s", 0, "y", 0, "b"): 5, ("s", 0, "y", 1): 6, ("s", 1): 7,
        ("s", 1, "y"): 8, ("s", 1, "y", 0): 8, ("s", 1, "y", 0, "b"): 9,
        ("s", 1, "y", 0, "z"): 10}),
    ("a = 1979-05-27 07:32:00Z\nb = [1979-05-27 07:32:00,\n-inf]\nc = 1_0e-1_0", {
        ("a",): 1, ("b",): 2, ("b", 0): 2, ("b", 1): 3, ("c",): 4}),
    ("true = true\n1.2 = 3\n-_- = 4", {("true",): 1, ("1",): 2, ("1", "2"): 2, ("-_-",): 3}),
]  # fmt: skip


@pytest.mark.parametrize(("text", "lines"), TRICKY, ids=range(len(TRICKY)))
def test_tricky_documents(text: str, lines: dict[KeyPath, int]) -> None:
    assert locate_keys(text) == lines


WORDS = st.sampled_from(["a", "b-c", "d_1", "é", "x y", 'q"q', "#", "[z]", "p.q", "", "=", "'"])
SCALARS = st.sampled_from([
    "1", "-2.5e-3", "true", "nan", '"#\\"]"', "'[}'", '"""\n\n# no = key\n"""', "'''a\n'''",
    "2020-01-01 10:00:00", '"" # end', '""', "0x1F",
])  # fmt: skip
VALUES: st.SearchStrategy[Any] = st.recursive(
    SCALARS,
    lambda inner: st.lists(inner, max_size=3) | st.dictionaries(WORDS, SCALARS, max_size=3),
    max_leaves=5,
)
TABLES: st.SearchStrategy[Any] = st.recursive(
    st.dictionaries(WORDS, VALUES, max_size=3).map(lambda pairs: (pairs, {}, {})),
    lambda inner: st.tuples(
        st.dictionaries(WORDS, VALUES, max_size=2),
        st.dictionaries(WORDS.map(lambda word: f"t{word}"), inner, max_size=2),
        st.dictionaries(
            WORDS.map(lambda word: f"l{word}"), st.lists(inner, min_size=1, max_size=3), max_size=2
        ),
    ),
    max_leaves=6,
)


class CountingWriter:
    """Writes TOML in varied dress and counts lines as it goes."""

    def __init__(self, draw: st.DrawFn) -> None:
        self.draw = draw
        self.text = ""
        self.lines: dict[KeyPath, int] = {}

    def put(self, text: str) -> None:
        self.text += text

    def note(self, path: KeyPath) -> None:
        self.lines.setdefault(path, self.text.count("\n") + 1)

    def gap(self) -> str:
        return self.draw(st.sampled_from(["", " ", "\t"]))

    def key(self, word: str) -> str:
        escaped = word.replace("\\", "\\\\").replace('"', '\\"')
        forms = [f'"{escaped}"', '"' + "".join(f"\\u{ord(c):04x}" for c in word) + '"']
        if "'" not in word:
            forms.append(f"'{word}'")
        if word and all(c.isascii() and (c.isalnum() or c in "-_") for c in word):
            forms.append(word)
        return self.draw(st.sampled_from(forms))

    def fill(self) -> None:
        self.put(self.draw(st.sampled_from(["", "\n", "# [no]\n", "\n  # no = 1\n\n", "\r\n"])))

    def value(self, value: Any, path: KeyPath, inline: bool) -> None:
        if isinstance(value, str):
            plain = value.split(" # ")[0] if inline else value
            self.put("1" if inline and "\n" in plain else plain)
        elif isinstance(value, list):
            self.put("[")
            for index, item in enumerate(value):
                if not inline:
                    self.put(self.draw(st.sampled_from(["", "\n", " # ]\n", "\n\n "])))
                self.note((*path, index))
                self.value(item, (*path, index), True)
                self.put("," if index < len(value) - 1 else "")
            self.put("]")
        else:
            self.put("{" + self.gap())
            for index, (word, item) in enumerate(value.items()):
                self.put(", " if index else "")
                self.note((*path, word))
                self.put(f"{self.key(word)}{self.gap()}={self.gap()}")
                self.value(item, (*path, word), True)
            self.put(self.gap() + "}")

    def table(self, table: Any, path: KeyPath, names: tuple[str, ...]) -> None:
        pairs, tables, lists = table
        for word, value in pairs.items():
            self.fill()
            self.note((*path, word))
            self.put(f"{self.gap()}{self.key(word)}{self.gap()}={self.gap()}")
            self.value(value, (*path, word), False)
            self.put("\n")
        for word, inner in tables.items():
            self.header((*path, word), (*names, word), "[", "]")
            self.table(inner, (*path, word), (*names, word))
        for word, items in lists.items():
            for index, inner in enumerate(items):
                self.fill()
                self.note((*path, word))
                self.header((*path, word, index), (*names, word), "[[", "]]")
                self.table(inner, (*path, word, index), (*names, word))

    def header(self, path: KeyPath, names: tuple[str, ...], left: str, right: str) -> None:
        if left == "[":
            self.fill()
        self.note(path)
        dots = f"{self.gap()}.{self.gap()}".join(self.key(word) for word in names)
        comment = self.draw(st.sampled_from(["", " # [x]"]))
        self.put(f"{self.gap()}{left}{self.gap()}{dots}{self.gap()}{right}{comment}\n")


@st.composite
def documents(draw: st.DrawFn) -> tuple[str, dict[KeyPath, int]]:
    writer = CountingWriter(draw)
    writer.table(draw(TABLES), (), ())
    return writer.text, writer.lines


def paths(value: Any, path: KeyPath = ()) -> Iterator[KeyPath]:
    inner = value.items() if isinstance(value, dict) else enumerate(value)
    for key, item in inner if isinstance(value, (dict, list)) else ():
        yield (*path, key)
        if isinstance(item, (dict, list)):
            yield from paths(item, (*path, key))


@given(documents())
def test_lines_are_those_the_writer_counted(document: tuple[str, dict[KeyPath, int]]) -> None:
    text, lines = document
    assert set(paths(tomllib.loads(text))) == set(lines)  # the writer itself is right
    assert locate_keys(text) == lines


@given(st.text(alphabet="ab=[]{}.,\"'#\n\\ 1", max_size=40))
def test_every_key_of_any_valid_text_is_located(text: str) -> None:
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    assert set(locate_keys(text)) == set(paths(data))


def test_words_for_places() -> None:
    assert dotted(("sweep", 1, "axes", "v gs")) == 'sweep[2].axes."v gs"'
    assert nearest_line({("a",): 4, ("a", "b"): 6}, ("a", "b", "c")) == 6
    assert nearest_line({("a",): 4}, ("z",)) == 1
