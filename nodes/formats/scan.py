"""Numbers read from text, byte by byte: what the OBJ and the ascii PLY reader are made of.

Every text ends with a newline, so a loop over digits or spaces stops by itself and needs no check of the size.
A reader returns its value and the offset after it; the same offset as it was given means that nothing was there.
Offsets are unsigned: a signed index may count from the array's end, and asking for each byte whether it does takes
half as long again as reading it. Mixed with a signed number they would turn into floating point: add ONE, not 1.
"""

from __future__ import annotations

import numpy as np
from numba import njit
from tangentry.pipeline.flow import Array

NEWLINE, RETURN, SPACE, HASH, PLUS, MINUS, POINT, ZERO, BACKSLASH, SMALL_E, SMALL_I, SMALL_N = np.frombuffer(
    b"\n\r #+-.0\\ein", np.uint8
)
NONE, ONE = np.uint64(0), np.uint64(1)
POWERS = 10.0 ** np.arange(23)  # each exact in float64, so one product or quotient rounds once
FIRST = 1 << 16  # bytes in which a line most likely ends
MOST_FLOAT = float(np.finfo(np.float32).max)
MOST = 10**17  # a mantissa below this takes one digit more within int64


def as_text(content: Array) -> Array:
    """The same bytes, ending with a newline; lone carriage returns become newlines, and a mark of UTF-8 goes."""
    if content[:3].tobytes() == b"\xef\xbb\xbf":
        content = content[3:]
    if NEWLINE not in content[:FIRST] and NEWLINE not in content:
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
def signed(i: np.uint64) -> np.int64:
    """An offset as a number to reckon with."""
    return np.int64(i)


@njit(cache=True, nogil=True)
def skip_space(text: Array, i: np.uint64) -> np.uint64:
    """The offset of the next byte that is not space; a backslash before a line's end counts as space, with that end."""
    i = np.uint64(i)
    while True:
        c = text[i]
        if c > SPACE:
            if c != BACKSLASH:
                return i
            end = i + ONE
            if text[end] == RETURN:
                end += ONE
            if text[end] != NEWLINE or end + ONE >= np.uint64(len(text)):
                return i
            i = end + ONE
        elif c == NEWLINE:
            return i
        else:
            i += ONE


@njit(cache=True, nogil=True)
def skip_line(text: Array, i: np.uint64) -> np.uint64:
    """The offset after the line's end; a line's end after a backslash does not end it."""
    i = np.uint64(i)
    while True:
        while text[i] != NEWLINE:
            i += ONE
        before = i
        i += ONE
        if before > NONE and text[before - ONE] == RETURN:
            before -= ONE
        if before == NONE or text[before - ONE] != BACKSLASH or i >= np.uint64(len(text)):
            return i


@njit(cache=True, nogil=True)
def skip_word(text: Array, i: np.uint64) -> np.uint64:
    """The offset of the next space or line's end."""
    i = np.uint64(i)
    while text[i] > SPACE:
        i += ONE
    return i


@njit(cache=True, nogil=True)
def read_integer(text: Array, i: np.uint64) -> tuple[np.int64, np.uint64]:
    """A whole number with or without its sign; larger ones than 18 digits stay at a number beyond any index."""
    start = i = np.uint64(i)
    c = text[i]
    if c in (MINUS, PLUS):
        i += ONE
    first = i
    value = np.int64(0)
    while True:
        digit = np.int64(text[i] ^ ZERO)
        if digit > 9:
            break
        if value < MOST:
            value = value * 10 + digit
        i += ONE
    if i == first:
        return np.int64(0), start
    return (-value if c == MINUS else value), i


@njit(cache=True, nogil=True)
def read_number(text: Array, i: np.uint64) -> tuple[float, np.uint64]:
    """A decimal number: 1, -1.5, .5, 1., 1e-3; what printers make of not-a-number and infinity is NaN.

    Up to 17 digits and powers of ten up to 22 round correctly (Clinger 1990); beyond, within a few units of float64.
    """
    start = i = np.uint64(i)
    negative = text[i] == MINUS
    if negative or text[i] == PLUS:
        i += ONE
    first = i
    mantissa, exponent = np.int64(0), np.int64(0)
    while True:
        digit = np.int64(text[i] ^ ZERO)
        if digit > 9:
            break
        if mantissa < MOST:
            mantissa = mantissa * 10 + digit
        else:
            exponent += 1
        i += ONE
    digits = i - first
    if text[i] == POINT:
        i += ONE
        first = i
        while True:
            digit = np.int64(text[i] ^ ZERO)
            if digit > 9:
                break
            if mantissa < MOST:
                mantissa = mantissa * 10 + digit
                exponent -= 1
            i += ONE
        digits += i - first
    c = text[i]
    if digits == 0 or c == HASH:
        return _no_number(text, start, i, digits > 0)
    if c | 32 == SMALL_E:
        power, after = read_integer(text, i + ONE)
        if after > i + ONE:
            exponent += min(max(power, -9999), 9999)
            i = after
    value = _scaled(mantissa, exponent)
    return (-value if negative else value), i


@njit(cache=True, nogil=True)
def _no_number(text: Array, start: np.uint64, i: np.uint64, digits: bool) -> tuple[float, np.uint64]:
    """NaN for nan, inf, 1.#IND and their like; else nothing was there."""
    broken = text[i - ONE] == POINT if digits else text[i] | 32 in (SMALL_N, SMALL_I) and text[i + ONE] > SPACE
    if broken:
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
