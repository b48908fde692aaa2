"""Numbers read from text, byte by byte: what the OBJ and the ascii PLY reader are made of.

Every text ends with a newline, so a loop over digits or spaces stops by itself and needs no check of the size.
A reader returns its value and the offset after it; the same offset as it was given means that nothing was there.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

NEWLINE, HASH, BACKSLASH = 10, 35, 92
POWERS = 10.0 ** np.arange(23)  # each exact in float64, so one product or quotient rounds once
MOST = 10**17  # a mantissa below this takes one digit more within int64


def as_text(content: Array) -> Array:
    """The same bytes, ending with a newline; lone carriage returns become newlines, and a mark of UTF-8 goes."""
    if content[:3].tobytes() == b"\xef\xbb\xbf":
        content = content[3:]
    if len(content) and not (content == NEWLINE).any():
        content = np.where(content == 13, np.uint8(NEWLINE), content)
    if not len(content) or content[-1] != NEWLINE:
        content = np.append(content, np.uint8(NEWLINE))
    content.setflags(write=False)
    return content


def as_words(text: bytes) -> str:
    """Text in UTF-8, or, where it is not, in Latin-1, which takes any byte."""
    try:
        return text.decode("utf-8-sig")
    except UnicodeDecodeError:
        return text.decode("latin-1")


def shown(name: str) -> str:
    """A name as messages show it: in one line, and not without end."""
    plain = "".join(one if one.isprintable() else "?" for one in name)
    return plain if len(plain) <= 80 else plain[:77] + "..."


@njit(cache=True, nogil=True)
def skip_space(text: Array, i: int) -> int:
    """The offset of the next byte that is not space; a backslash before a line's end counts as space, with that end."""
    while True:
        c = text[i]
        if c == 32 or c == 9 or c == 13 or c == 11 or c == 12:
            i += 1
        elif c == BACKSLASH and i + 2 < len(text) and text[i + 1] == NEWLINE:
            i += 2
        elif c == BACKSLASH and i + 3 < len(text) and text[i + 1] == 13 and text[i + 2] == NEWLINE:
            i += 3
        else:
            return i


@njit(cache=True, nogil=True)
def skip_line(text: Array, i: int) -> int:
    """The offset after the line's end; a line's end after a backslash does not end it."""
    while True:
        while text[i] != NEWLINE:
            i += 1
        before = i - 1
        if before >= 0 and text[before] == 13:
            before -= 1
        i += 1
        if before < 0 or text[before] != BACKSLASH or i >= len(text):
            return i


@njit(cache=True, nogil=True)
def skip_word(text: Array, i: int) -> int:
    """The offset of the next space or line's end."""
    while text[i] > 32:
        i += 1
    return i


@njit(cache=True, nogil=True)
def read_integer(text: Array, i: int) -> tuple[int, int]:
    """A whole number with or without its sign; larger ones than 18 digits stay at a number beyond any index."""
    start = i
    c = text[i]
    negative = c == 45
    if c == 45 or c == 43:
        i += 1
    first = i
    value = np.int64(0)
    while True:
        digit = np.int64(text[i]) - 48
        if digit < 0 or digit > 9:
            break
        if value < MOST:
            value = value * 10 + digit
        i += 1
    if i == first:
        return 0, start
    return (-value if negative else value), i


@njit(cache=True, nogil=True)
def read_number(text: Array, i: int) -> tuple[float, int]:
    """A decimal number: 1, -1.5, .5, 1., 1e-3; what printers make of not-a-number and infinity is NaN.

    Up to 17 digits and powers of ten up to 22 round correctly (Clinger 1990); beyond, within a few units of float64.
    """
    start = i
    c = text[i]
    negative = c == 45
    if c == 45 or c == 43:
        i += 1
    first = i
    mantissa = np.int64(0)
    exponent = np.int64(0)
    while True:
        digit = np.int64(text[i]) - 48
        if digit < 0 or digit > 9:
            break
        if mantissa < MOST:
            mantissa = mantissa * 10 + digit
        else:
            exponent += 1
        i += 1
    digits = i - first
    if text[i] == 46:
        i += 1
        first = i
        while True:
            digit = np.int64(text[i]) - 48
            if digit < 0 or digit > 9:
                break
            if mantissa < MOST:
                mantissa = mantissa * 10 + digit
                exponent -= 1
            i += 1
        digits += i - first
    c = text[i]
    if digits == 0 or c == HASH:
        return _no_number(text, start, i, digits)
    if c == 101 or c == 69:
        power, after = read_integer(text, i + 1)
        if after > i + 1:
            exponent += min(max(power, -9999), 9999)
            i = after
    value = _scaled(mantissa, exponent)
    return (-value if negative else value), i


@njit(cache=True, nogil=True)
def _no_number(text: Array, start: int, i: int, digits: int) -> tuple[float, int]:
    """NaN for nan, inf, 1.#IND and their like; else nothing was there."""
    c = text[i] | 32
    if (digits > 0 and text[i - 1] == 46) or (digits == 0 and (c == 110 or c == 105) and text[i + 1] > 32):
        return np.nan, skip_word(text, i)
    return 0.0, start


@njit(cache=True, nogil=True)
def _scaled(mantissa: int, exponent: int) -> float:
    if mantissa == 0 or exponent == 0:
        return np.float64(mantissa)
    if -23 < exponent < 0:
        return mantissa / POWERS[-exponent]
    if 0 < exponent < 23:
        return mantissa * POWERS[exponent]
    if exponent < -300:  # in two steps: the power alone would be lost
        return mantissa * 1e-300 * 10.0 ** np.float64(exponent + 300)
    return mantissa * 10.0 ** np.float64(exponent)
