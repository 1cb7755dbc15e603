"""Lines of keys, fuzzed against tomllib, which reads the same text independently."""

import tomllib

import pytest
from hypothesis import given, reject, settings
from hypothesis import strategies as st

from coldseam.case.source import Source, digest, scan
from coldseam.case.write import to_toml

TEXT = '''# a comment with = and [x]
title = "with # and ] and \\" in it"
"quoted.key" = 'lit'
a.b."c d" = 1

[model]   # comment
dimensions = 3
many = [ 1,   # one
  2,
  [3, 4], { x = 5 },
]
long = """
[not.a.table]
x = 1 \\""" ""
"""
lit = \'\'\'
[[nor.this]]
\'\'\'
after = 1

[[body]]
name = "a"
box = { from = [0, 0], to.x = [1, 2] }
[body.sub]
deep = 2
[[body.part]]
k = 1
[[body.part]]
k = 2

[[body]]
name = "b"
[[body.part]]
k = 3
[spaces."the bay"]
temperature = 1979-05-27 07:32:00
'''


def paths(document, path=()):
    """Yield every key path of a document."""
    items = document.items() if isinstance(document, dict) else enumerate(document)
    for key, value in items:
        yield (*path, key), value
        if isinstance(value, (dict, list)):
            yield from paths(value, (*path, key))


def line_with(text, piece):
    """Return the number of the only line that holds a piece of text."""
    found = [n for n, line in enumerate(text.split("\n"), 1) if piece in line]
    assert len(found) == 1, piece
    return found[0]


@pytest.mark.parametrize(
    ("path", "piece"),
    [
        (("title",), "title ="),
        (("quoted.key",), "quoted.key"),
        (("a", "b", "c d"), "c d"),
        (("model",), "[model]"),
        (("model", "many", 1), "  2,"),
        (("model", "many", 2, 1), "[3, 4]"),
        (("model", "many", 3, "x"), "x = 5"),
        (("model", "after"), "after ="),
        (("body", 0, "box", "to", "x", 1), "to.x"),
        (("body", 0, "sub", "deep"), "deep ="),
        (("body", 0, "part", 1, "k"), "k = 2"),
        (("body", 1, "name"), 'name = "b"'),
        (("body", 1, "part", 0, "k"), "k = 3"),
        (("spaces", "the bay", "temperature"), "1979"),
    ],
)
def test_lines(path, piece):
    assert scan(TEXT)[path] == line_with(TEXT, piece)


def test_every_path_of_the_sample_has_a_line():
    assert {path for path, _ in paths(tomllib.loads(TEXT))} == set(scan(TEXT))


@pytest.mark.parametrize("string", ['"""x"""""', '"""x""""', "'''x'''''", '""""""', "''''''", '""', "''", '"""\\""""'])
def test_quotes_right_before_the_closing_ones(string):
    text = f"a = {string}\nb = [{string}, 2,\n3]"
    assert set(scan(text)) == {path for path, _ in paths(tomllib.loads(text))}
    assert scan(text)[("b", 2)] == 3


def test_place_falls_back_to_what_is_around():
    from pathlib import Path

    source = Source(file="c.toml", folder=Path("."), text=TEXT, sha256=digest(TEXT), lines=scan(TEXT))
    at = line_with(TEXT, 'name = "b"')
    assert source.place(("body", 1, "name")) == f"c.toml:{at}"
    assert source.place(("body", 1, "absent", "key")) == f"c.toml:{at - 1}"
    assert source.place(("absent",)) == "c.toml"
    assert source.place(()) == "c.toml"


keys = st.text(
    st.characters(exclude_categories=["Cs", "Cc"], exclude_characters="\u2028\u2029\x85"), min_size=1, max_size=6
)
scalars = st.one_of(
    st.integers(-(10**9), 10**9),
    st.booleans(),
    st.floats(allow_nan=False),
    st.text(st.characters(exclude_categories=["Cs"]), max_size=12),
    st.sampled_from(['[x]\n"', "a = 1\n[b]", "'''", '"""', "\\", "# no", "}"]),
)
documents = st.dictionaries(
    keys,
    st.recursive(
        scalars,
        lambda inner: st.lists(inner, max_size=3) | st.dictionaries(keys, inner, max_size=3),
        max_leaves=8,
    ),
    max_size=4,
)


def quoted(key, style):
    """Return a key in one of TOML's spellings."""
    if style == 0 and key and key.isascii() and all(c.isalnum() or c in "-_" for c in key):
        return key
    if style == 1 and "'" not in key:
        return f"'{key}'"
    return to_toml({key: 1}).rpartition(" = ")[0] if not key.replace("_", "").isalnum() else f'"{key}"'


def spelled(draw, value):
    """Return a value in one of TOML's spellings, arrays over several lines with comments."""
    if isinstance(value, str) and draw(st.booleans()):
        if "'''" not in value and value.isprintable() and not value.endswith("'"):
            return f"'''\n{value}'''"
        body = value.replace("\\", "\\\\").replace('"', '\\"').replace("\r", "\\r")
        if all(c == "\n" or c == "\t" or (ord(c) >= 32 and ord(c) != 127) for c in body):
            return f'"""\n{body}"""'
    if isinstance(value, list):
        gap = draw(st.sampled_from(["", " ", "\n", " # , ] \n\t", "\n\n"]))
        return f"[{gap}{f',{gap}'.join(spelled(draw, item) for item in value)}{gap}]"
    if isinstance(value, dict):
        pairs = (f"{quoted(key, draw(st.integers(0, 2)))} = {spelled(draw, item)}" for key, item in value.items())
        return f"{{ {', '.join(pairs)} }}"
    return to_toml({"k": value})[4:].rstrip("\n")


@st.composite
def texts(draw):
    """A TOML text in varied spelling, with tables, arrays of tables and dotted keys."""
    parts = []
    for head in draw(st.lists(keys, max_size=3, unique=True)):
        name = quoted(head, draw(st.integers(0, 2)))
        form = draw(st.sampled_from(["table", "array", "sub", "dotted"]))
        for number in range(draw(st.integers(1, 3)) if form == "array" else 1):
            header = {"table": f"[{name}]", "array": f"[[ {name} ]]", "sub": f"[{name} . 'in' .x]"}.get(form, "")
            table = draw(documents)
            pairs = [f"{quoted(key, draw(st.integers(0, 2)))} = {spelled(draw, v)}" for key, v in table.items()]
            if form == "dotted":
                parts.insert(0, f"{name}.n{number} = {spelled(draw, table)}")
            else:
                parts.append("\n".join([header + draw(st.sampled_from(["", " # [c]"])), *pairs]))
            if form == "array" and draw(st.booleans()):
                parts.append(f"[{name}.zz_sub]\nq = [1,\n2]")
    return draw(st.sampled_from(["\n", "\n\n# x = [\n"])).join(parts) + draw(st.sampled_from(["", "\n"]))


@settings(max_examples=50, deadline=None)
@given(texts())
def test_scanner_agrees_with_tomllib(text):
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        reject()  # zz_sub is a key of the entry already, say; too many of these fail the health check
    lines = scan(text)
    assert set(lines) == {path for path, _ in paths(document)}
    rows = text.split("\n")
    for path, line in lines.items():
        key = path[-1]
        if isinstance(key, str):
            escaped = to_toml({key: 1}).rpartition(" = ")[0].strip('"')
            assert key in rows[line - 1] or escaped in rows[line - 1]


@settings(max_examples=40, deadline=None)
@given(documents)
def test_written_documents_read_back(document):
    assert tomllib.loads(to_toml(document)) == document


def test_fuzz_finds_a_broken_scanner(monkeypatch):
    """The comparison above must notice a scanner that takes text in strings for keys."""
    from coldseam.case import source

    def blind(self):
        self.at += 1

    monkeypatch.setattr(source._Scanner, "_string", blind)
    with pytest.raises((AssertionError, ValueError, IndexError)):
        text = 'a = """\n[b]\n"""\nc = 1'
        assert set(scan(text)) == {path for path, _ in paths(tomllib.loads(text))}
