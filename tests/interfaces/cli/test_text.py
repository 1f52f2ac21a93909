"""Words and numbers for people."""

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from farhold.interfaces.cli.documents import plain
from farhold.interfaces.cli.text import listed, nearest, number, plain_text, plural, years


@pytest.mark.parametrize(
    ("value", "text"),
    [
        (0.0, "0"),
        (1.8, "1.800"),
        (12345.6, "12,346"),
        (0.00123456, "0.001235"),
        (2e-6, "2.000e-06"),
        (-0.5, "-0.5000"),
        (math.nan, "-"),
        (None, "-"),
    ],
)
def test_number_is_written_with_four_digits(value, text):
    assert number(value) == text


@given(st.floats(1e-12, 1e12))
def test_number_reads_back_within_its_digits(value):
    assert float(number(value).replace(",", "")) == pytest.approx(value, rel=5.1e-4)


@given(st.text())
def test_plain_text_has_nothing_that_moves_a_cursor(text):
    assert all(char.isprintable() or char == " " or ord(char) > 0x9F for char in plain_text(text))


@pytest.mark.parametrize(("life", "text"), [(3.24, "3.2"), (100.0, "over 100"), (math.nan, "-")])
def test_years_say_the_cap(life, text):
    assert years(life) == text


def test_listed_counts_what_it_leaves_out():
    assert listed(["a", "b", "c"], most=2) == "a, b and 1 more"


def test_nearest_names_only_what_is_near():
    assert (nearest("wdie", ["wide", "huddle"]), nearest("zzz", ["wide"])) == ("did you mean 'wide'?", "")


def test_plural_follows_the_count():
    assert (plural(1, "entry", "entries"), plural(2000, "entry", "entries")) == ("1 entry", "2,000 entries")


def test_plain_turns_arrays_tuples_and_missing_into_json_values():
    import numpy as np
    import pandas as pd

    given = {
        "a": np.float64("nan"),
        "b": (np.int64(3), True),
        "c": np.arange(2),
        "d": pd.NaT,
        "e": pd.NA,
        1: "x",
    }
    assert plain(given) == {"a": None, "b": [3, True], "c": [0, 1], "d": None, "e": None, "1": "x"}
