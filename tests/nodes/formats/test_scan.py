"""Numbers read from bytes are those that Python reads from words."""

from __future__ import annotations

import math

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from tangentry.nodes.formats.scan import as_text, as_words, read_integer, read_number, shown, skip_line, skip_space


def text(words):
    """Bytes that end with a newline."""
    return as_text(np.frombuffer(words if isinstance(words, bytes) else words.encode(), np.uint8))


@settings(max_examples=500, deadline=None)
@given(
    st.floats(width=32, allow_nan=False, allow_infinity=False), st.sampled_from(["{!r}", "{:.9g}", "{:f}", "{:+.6E}"])
)
def test_every_float32_is_read_as_it_was_written(value, form):
    word = form.format(value)

    number, end = read_number(text(word + " 7"), 0)

    assert int(end) == len(word)
    assert np.float32(number) == np.float32(float(word))


@settings(max_examples=300, deadline=None)
@given(st.integers(0, 10**15), st.integers(-22, 22))
def test_up_to_fifteen_digits_round_once(mantissa, exponent):
    word = f"{mantissa}e{exponent}"

    assert read_number(text(word), 0)[0] == float(word)


@settings(max_examples=300, deadline=None)
@given(st.from_regex(r"[+-]?([0-9]{1,40}\.?[0-9]{0,40}|\.[0-9]{1,40})([eE][+-]?[0-9]{1,4})?", fullmatch=True))
def test_any_decimal_is_read_to_the_end_and_closely(word):
    number, end = read_number(text(word), 0)

    assert int(end) == len(word)
    assert math.isclose(number, float(word), rel_tol=1e-13, abs_tol=1e-300)


@pytest.mark.parametrize("word", ["nan", "-nan", "NaN", "inf", "-Infinity", "1.#IND", "-1.#INF", "1.#QNAN"])
def test_what_printers_make_of_no_number_is_nan(word):
    number, end = read_number(text(word), 0)

    assert math.isnan(number) and int(end) == len(word)


@pytest.mark.parametrize("word", ["", "-", "+", ".", "e5", "x1", "/", "\\"])
def test_where_no_number_stands_nothing_is_read(word):
    assert read_number(text(word), 0) == (0.0, 0)
    assert read_integer(text(word), 0) == (0, 0)


@settings(max_examples=200, deadline=None)
@given(st.integers(-(10**40), 10**40))
def test_whole_numbers_beyond_any_index_stay_beyond(value):
    number, end = read_integer(text(str(value)), 0)

    assert int(end) == len(str(value))
    assert number == value if abs(value) < 10**17 else abs(number) >= 10**16 and (number < 0) == (value < 0)


@pytest.mark.parametrize("end", ["\\\n", "\\\r\n", "\t\r\v\f\0 "])
def test_a_line_goes_on_over_a_backslash_and_space_is_all_below_a_letter(end):
    words = text(f"f{end}x\nv")

    assert int(skip_space(words, 1)) == 1 + len(end)
    assert int(skip_line(words, 0)) == len(f"f{end}x\n")
    assert int(skip_line(words, 1 + len(end) - 1)) == len(f"f{end}x\n")


def test_names_are_shown_in_one_line_and_not_without_end():
    assert shown("a\nb\0c") == "a?b?c" and len(shown("x" * 10_000)) == 80
    assert as_words(b"\xef\xbb\xbfd\xc3\xa9ck") == as_words(b"d\xe9ck") == "d\u00e9ck"
