"""Lines of keys: against hand-made texts, against texts written key by key, and against tomllib's data."""

import tomllib

import pytest
from hypothesis import given
from hypothesis import strategies as st

from calibrate.study.reading.toml_lines import key_lines


def walk(data, path=()):
    """Every place in the data that tomllib read."""
    if isinstance(data, dict):
        items = data.items()
    elif isinstance(data, list):
        items = enumerate(data)
    else:
        return
    for key, value in items:
        yield (*path, key)
        yield from walk(value, (*path, key))


def lines_of(text):
    lines = key_lines(text)
    assert lines.repeated == {}
    assert set(lines.at) == set(walk(tomllib.loads(text)))
    return lines.at


def test_tables_and_pairs():
    at = lines_of("a = 1\n\n# comment\n[b]\nc = 2 # d = 3\n  e=4\n[b.f]\ng = 5\n")
    assert at == {("a",): 1, ("b",): 4, ("b", "c"): 5, ("b", "e"): 6, ("b", "f"): 7, ("b", "f", "g"): 8}


def test_dotted_and_quoted_keys():
    at = lines_of('a.b.c = 1\na . "d e" = 2\n"f_u, theta_R" = 3\n\'x.y\' = 4\n"tab\\tkey" = 5\n')
    assert at[("a",)] == 1
    assert at[("a", "b", "c")] == 1
    assert at[("a", "d e")] == 2
    assert at[("f_u, theta_R",)] == 3
    assert at[("x.y",)] == 4
    assert at[("tab\tkey",)] == 5


def test_inline_tables_and_arrays_over_lines():
    text = 'x = { from = 1, "to" = 2, in.ner = { k = [1, { z = 1 }] } }\n'
    text += 'y = [\n  1, # one\n  { a = "]}" },\n\n]\nz = 1\n'
    at = lines_of(text)
    assert at[("x", "in", "ner", "k", 1, "z")] == 1
    assert (at[("y",)], at[("y", 0)], at[("y", 1)], at[("y", 1, "a")]) == (2, 3, 4, 4)
    assert at[("z",)] == 7


def test_long_texts_do_not_count_as_keys():
    text = 'a = """\nb = 1\n[c]\n\\"""\n"""\nd = \'\'\'\ne = 1 \'\'\ne\'\'\'\'\nf = """x"""""\ng = 1\n'
    at = lines_of(text)
    assert at == {("a",): 1, ("d",): 6, ("f",): 9, ("g",): 10}


def test_values_of_every_kind():
    text = (
        'a = 1979-05-27 07:32:00 # date\nb = "x # y"\nc = \'x " y\'\nd = -1_000.5e-3\n'
        'e = [[1, 2], []]\nf = ""\n'
        "g = ''\nh = inf\ni = true\nj = {}\nk = 07:32:00\n"
    )
    assert [line for path, line in lines_of(text).items() if len(path) == 1] == list(range(1, 12))


def test_arrays_of_tables():
    at = lines_of("[[a]]\nb = 1\n[[a]]\nb = 2\n[a.c]\nd = 3\n[[a.e]]\nf = 1\n")
    assert at[("a", 0)] == 1
    assert at[("a", 1, "b")] == 4
    assert at[("a", 1, "c", "d")] == 6
    assert at[("a", 1, "e", 0, "f")] == 8


def test_own_header_wins_over_mention_in_another():
    assert lines_of("[a.b]\nc = 1\n[a]\nd = 1\n")[("a",)] == 3


def test_keys_set_twice():
    assert key_lines("[a]\nb = 1\nc = 2\nb = 3\n").repeated == {("a", "b"): (2, 4)}
    assert key_lines("[a]\nb = 1\n[c]\n[a]\n").repeated == {("a",): (1, 4)}
    assert key_lines("a = { b = 1, b = 2 }\n").repeated == {("a", "b"): (1, 1)}


def test_nearest_place_with_a_line():
    lines = key_lines("[a]\nb = { c = 1 }\n")
    assert lines.line(("a", "b", "nothing", 3)) == 2
    assert lines.line(("a", "nothing")) == 1
    assert lines.line(("nothing",)) is None
    assert lines.line(()) is None


@pytest.mark.parametrize(
    "text", ["a", "a = ", "[a", "[[a]", "= 1", "a = [1", "a = { b", '"\\q" = 1', "a = 'x", "é = 1"]
)
def test_text_that_is_not_toml_ends_the_scan(text):
    assert key_lines("first = 1\n" + text).at[("first",)] == 1


def test_deep_nesting_ends_the_scan():
    assert key_lines("a = " + "[" * 100_000).at[("a",)] == 1


# A document is written key by key, with the line of each key noted by the writer.
keys = st.text(min_size=1, max_size=6).filter(lambda s: all(c.isprintable() for c in s))
scalars = st.one_of(
    st.integers(-1000, 1000),
    st.booleans(),
    st.text(alphabet=st.sampled_from("ab \"'#=[]{},\n\\."), max_size=12),
)
values = st.recursive(
    scalars, lambda v: st.one_of(st.lists(v, max_size=3), st.dictionaries(keys, v, max_size=3)), max_leaves=8
)
tables = st.dictionaries(keys, st.dictionaries(keys, values, max_size=4), max_size=4)
layout = st.lists(st.sampled_from(["", "\n", "# a = 1\n", "\n\n  # [x]\n"]), min_size=1, max_size=5)


class Writer:
    def __init__(self, gaps):
        self.text = ""
        self.gaps = gaps
        self.count = 0
        self.lines = {}

    def gap(self):
        self.count += 1
        return self.gaps[self.count % len(self.gaps)]

    def note(self, path):
        self.lines[path] = self.text.count("\n") + 1

    def put_key(self, key):
        escaped = "".join(f"\\u{ord(c):04x}" if c in '"\\' or ord(c) < 32 else c for c in key)
        self.text += f'"{escaped}"' if self.count % 2 or not key.isascii() or not key.isalnum() else key

    def put(self, value, path):
        if isinstance(value, bool):
            self.text += str(value).lower()
        elif isinstance(value, int):
            self.text += str(value)
        elif isinstance(value, str):
            plain = "'" not in value and "\n" not in value and "\\" not in value
            escaped = value.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
            long = value.replace("\\", "\\\\").replace('"', '\\"')
            forms = [f'"{escaped}"', f'"""\n{long}"""', f"'{value}'" if plain else f'"{escaped}"']
            self.text += forms[self.count % 3]
        elif isinstance(value, list):
            self.text += "["
            for i, item in enumerate(value):
                self.text += self.gap()
                self.note((*path, i))
                self.put(item, (*path, i))
                self.text += self.gap() + "," + self.gap()
            self.text += "]"
        else:
            self.text += "{"
            for i, (key, item) in enumerate(value.items()):
                self.text += ", " if i else " "
                self.note((*path, key))
                self.put_key(key)
                self.text += " = "
                self.put(item, (*path, key))
            self.text += "}"


@given(tables, layout)
def test_any_document(document, gaps):
    writer = Writer(gaps)
    for table, pairs in document.items():
        writer.text += writer.gap()
        writer.note((table,))
        writer.text += "[ "
        writer.put_key(table)
        writer.text += " ]\n"
        for key, value in pairs.items():
            writer.text += writer.gap()
            writer.note((table, key))
            writer.put_key(key)
            writer.text += " = "
            writer.put(value, (table, key))
            writer.text += "  # end\n"
    assert tomllib.loads(writer.text) == document
    assert lines_of(writer.text) == writer.lines


@given(st.text(alphabet=st.sampled_from("ab1\"'#=[]{},.\n \\"), max_size=60))
def test_any_text_at_all(text):
    lines = key_lines(text)
    try:
        data = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        assert all(1 <= line <= text.count("\n") + 1 for line in lines.at.values())
    else:
        assert set(lines.at) == set(walk(data))
