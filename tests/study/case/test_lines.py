"""The index from key paths to lines, against tomllib and against texts of known layout."""

from __future__ import annotations

import tomllib
from typing import Any

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.study.case.lines import KeyPath, index_lines

TEXT = '''\
# a comment with [brackets] = "and quotes"
schema = 1
title = "a # b [c]"
a.b."c d".e = 4

[class.probe]   # behind a header
mass = "5 kg"
more = { x = 1, y = { z = "}" } }
[[swarm]]
name = """
[not.a.table]
key = 1"""
[[swarm]]
names = [
  "one",
  # a comment ]
  "two",
  ["three",
   'fo"ur'],
]
[[swarm.part]]
n = 1
[[swarm.part]]
n = 2
[swarm.part.deep]
last = 2035-03-20 00:00:00
'''


@pytest.mark.parametrize(
    ("path", "line"),
    [
        (("schema",), 2),
        (("title",), 3),
        (("a", "b", "c d", "e"), 4),
        (("class", "probe"), 6),
        (("class", "probe", "more", "y", "z"), 8),
        (("swarm",), 9),
        (("swarm", 0, "name"), 10),
        (("swarm", 1), 13),
        (("swarm", 1, "names", 1), 17),
        (("swarm", 1, "names", 2, 1), 19),
        (("swarm", 1, "part", 0, "n"), 22),
        (("swarm", 1, "part", 1, "n"), 24),
        (("swarm", 1, "part", 1, "deep", "last"), 26),
        (("swarm", 1, "missing"), 13),
        (("nowhere",), 1),
        ((), 1),
    ],
)
def test_index_finds_the_line(path: KeyPath, line: int) -> None:
    assert index_lines(TEXT).at(path) == line


def paths(node: Any, path: KeyPath = ()) -> list[KeyPath]:
    inner = node.items() if isinstance(node, dict) else enumerate(node) if isinstance(node, list) else ()
    return [path, *(found for key, value in inner for found in paths(value, (*path, key)))]


KEYS = st.text(alphabet="abZ09_-", min_size=1, max_size=4)
LEAVES = st.one_of(
    st.integers(-9, 9).map(str),
    st.text(alphabet="a#[]{}=,.' ", max_size=6).map(lambda text: f'"{text}"'),
    st.text(alphabet='a#[]{}=,."\\ ', max_size=6).map(lambda text: f"'{text}'"),
    st.text(alphabet="a#[]=\n", max_size=6).map(lambda text: f'"""{text}\\""""'),
    st.sampled_from(["true", "1979-05-27T07:32:00", "2035-03-20 00:00:00", "1e-3", "nan", '"\\"]"']),
)
VALUES = st.recursive(
    LEAVES,
    lambda inner: st.one_of(
        st.lists(inner, max_size=3).map(lambda items: "[\n " + ", # ]\n ".join(items) + "\n]"),
        st.dictionaries(KEYS, LEAVES.filter(lambda leaf: "\n" not in leaf), max_size=3).map(
            lambda table: "{ " + ", ".join(f"{key} = {value}" for key, value in table.items()) + " }"
        ),
    ),
    max_leaves=6,
)
TABLES = st.dictionaries(KEYS, VALUES, max_size=3)


def body(table: dict[str, str]) -> str:
    return "".join(f"{key} = {value}  # [x]\n" for key, value in table.items())


@given(TABLES, st.dictionaries(KEYS, st.lists(TABLES, min_size=1, max_size=3), max_size=3))
def test_index_holds_every_path_that_tomllib_reads(
    top: dict[str, str], lists: dict[str, list[dict[str, str]]]
) -> None:
    text = body(top)
    for name, tables in lists.items():
        text += "".join(f"[[list.{name}]]\n{body(table)}" for table in tables)
    try:
        document = tomllib.loads(text)
    except tomllib.TOMLDecodeError:
        return
    index = index_lines(text).lines
    expected = set(paths(document)) - {()}
    assert set(index) == expected
    lines = text.split("\n")
    # a key stands on its line
    for path, line in index.items():
        if isinstance(path[-1], str):
            assert path[-1] in lines[line - 1]
