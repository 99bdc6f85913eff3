"""TOML files read for a person: where a key stands, and what is wrong with the file as a whole."""

from __future__ import annotations

import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from analyzer.errors import FaultassayError
from analyzer.toml_file import key_of, line_of, parse_toml, read_toml

TEXT = '''\
top = 1                         # 1
[site]
name = "a"                      # 3
text = """
[terminal]
name = 5
"""
after = 2                       # 8
[[terminal]]
name = "one"                    # 10
currents = { a = "IA", b = 5 }
[terminal.source]
z1_ohm = [
  1,
  -2,
]
[[terminal]]                    # 17
"name" = "two"
line.length_km = 3              # 19
[terminal . unit]
"I.A 1" = "kA"                  # 21
[[terminal.part]]
x = 1                           # 23
[[terminal.part]]
x = 2                           # 25
'''


@pytest.mark.parametrize(
    ("location", "line"),
    [
        (("top",), 1),
        (("site",), 2),
        (("site", "name"), 3),
        (("site", "after"), 8),
        (("site", "absent"), 2),
        (("terminal", 0), 9),
        (("terminal", 0, "name"), 10),
        (("terminal", 0, "currents", "b"), 11),
        (("terminal", 0, "source", "z1_ohm", 1), 13),
        (("terminal", 1, "name"), 18),
        (("terminal", 1, "line", "length_km"), 19),
        (("terminal", 1, "unit", "I.A 1"), 21),
        (("terminal", 1, "part", 0, "x"), 23),
        (("terminal", 1, "part", 1, "x"), 25),
        (("terminal",), 9),
        (("nowhere",), None),
    ],
)
def test_the_line_of_a_key(location, line):
    tomllib.loads(TEXT)
    assert line_of(TEXT, location) == line
    assert line_of(TEXT.replace("\n", "\r\n"), location) == line


NAMES = st.text("abcXYZ019_- .é\"\\'#=[]", min_size=1, max_size=6)


def _quoted(name: str) -> str:
    escaped = name.replace("\\", "\\\\").replace('"', '\\"')
    return f'"{escaped}"'


@settings(deadline=None, derandomize=True, max_examples=100)
@given(
    st.lists(st.tuples(NAMES, st.lists(NAMES, max_size=4, unique=True)), max_size=5, unique_by=lambda t: t[0])
)
def test_every_key_of_any_tables_is_found(tables):
    lines, places = [], {}
    for table, keys in tables:
        lines.append(f"[{_quoted(table)}]  # remark = 1")
        places[(table,)] = len(lines)
        for key in keys:
            lines.append(f"{_quoted(key)} = 1")
            places[(table, key)] = len(lines)
    text = "\n".join(lines)
    tree = tomllib.loads(text)
    for location, line in places.items():
        assert location[0] in tree
        assert line_of(text, location) == line


def test_a_location_reads_as_a_dotted_key():
    assert key_of(("terminal", 0, "unit", "I A")) == 'terminal[0].unit."I A"'
    assert key_of(("unit", "x", "[key]")) == "unit.x"
    assert key_of(()) == ""


@pytest.mark.parametrize(
    ("text", "where"),
    [("[site\n", "f.toml, line 1"), ("a = 1\nb = \n", "f.toml, line 2"), ("a = 1\na = 2", "f.toml, line 2"),
     ("a = '" , "f.toml, line 1")],
)  # fmt: skip
def test_what_is_no_toml_has_its_line(text, where):
    with pytest.raises(FaultassayError, match="no valid TOML") as caught:
        parse_toml(text, name="f.toml", raises=FaultassayError)
    assert (caught.value.code, caught.value.where) == ("bad-toml", where)


@pytest.mark.parametrize("text", ["a = " + "[" * 20_000, "a = " + "9" * 5000])
def test_what_python_cannot_parse_is_an_error_like_others(text):
    with pytest.raises(FaultassayError) as caught:
        parse_toml(text, name="f.toml", raises=FaultassayError)
    assert caught.value.code == "bad-toml"


def test_files_that_cannot_be_read(tmp_path):
    (tmp_path / "latin.toml").write_bytes(b"[site]\nname = '\xfc'\n")
    (tmp_path / "large.toml").write_bytes(b"#" * ((1 << 20) + 1))
    (tmp_path / "marked.toml").write_bytes(b"\xef\xbb\xbfa = 1")
    for name, code, said in (
        ("latin.toml", "bad-toml", "latin.toml, line 2: is not UTF-8"),
        ("large.toml", "cannot-read", "1 MiB"),
        ("gone.toml", "cannot-read", "cannot be read"),
        (".", "cannot-read", "cannot be read"),
        ("a\0b", "cannot-read", "cannot be read"),
    ):
        with pytest.raises(FaultassayError) as caught:
            read_toml(tmp_path / name, raises=FaultassayError)
        assert caught.value.code == code
        assert said in str(caught.value)
    assert read_toml(tmp_path / "marked.toml", raises=FaultassayError).tree == {"a": 1}
