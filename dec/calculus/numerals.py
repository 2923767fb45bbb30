"""Plain decimals in text, read exactly and all at once; anything else is left to who asks."""

from dataclasses import dataclass

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray, ObjectArray

__all__ = ["Plain", "plain_decimals"]

_MOST_DIGITS = 18  # ten to this power stays below 2**62
_WIDTH = _MOST_DIGITS + 2  # a sign and a decimal sign
_AT_ONCE = 1 << 16  # texts whose letters stay in the processor's cache
_ZERO, _PLUS, _MINUS = 48, 43, 45


@dataclass(frozen=True, slots=True)
class Plain:
    """Texts that are plain decimals: text = integer * 10**-places.

    Attributes
    ----------
    is_plain : bool array, shape (n,)
        True for an optional sign, at most 18 digits, and at most one decimal sign among them; nothing else.
    integers : int64 array, shape (n,)
        0 where the text is not plain.
    places : int64 array, shape (n,)
        Digits after the decimal sign; 0 where the text is not plain.
    is_negative : bool array, shape (n,)
        Whether the text begins with a minus; it tells -0 from 0.
    """

    is_plain: BoolArray
    integers: IntArray
    places: IntArray
    is_negative: BoolArray

    @property
    def is_exact(self) -> BoolArray:
        """True where `floats` is the nearest float: whole number and power of ten are floats, one division rounds."""
        return np.asarray(self.is_plain & (np.abs(self.integers) < 2**53), dtype=bool)

    @property
    def floats(self) -> FloatArray:
        """The texts as floats; float64 array of shape (n,)."""
        size = np.abs(self.integers) / 10.0**self.places
        return np.asarray(np.where(self.is_negative, -size, size))


def plain_decimals(texts: ObjectArray, sign: str) -> Plain:
    """The texts that are plain decimals, read exactly by steps over all of them.

    Parameters
    ----------
    texts : object array of str, shape (n,)
    sign : str
        The decimal sign.

    Returns
    -------
    Plain

    Examples
    --------
    >>> found = plain_decimals(np.array(["-1.50", "7", "1e3"], dtype=object), ".")
    >>> found.is_plain, found.integers, found.places
    (array([ True,  True, False]), array([-150,    7,    0]), array([2, 0, 0]))
    """
    n = len(texts)
    found = Plain(np.zeros(n, bool), np.zeros(n, np.int64), np.zeros(n, np.int64), np.zeros(n, bool))
    for start in range(0, n, _AT_ONCE):
        part = slice(start, start + _AT_ONCE)
        _read(texts[part], ord(sign), [array[part] for array in _arrays(found)])
    return found


def _arrays(found: Plain) -> list[AnyArray]:
    return [found.is_plain, found.integers, found.places, found.is_negative]


def _read(texts: ObjectArray, sign: int, into: list[AnyArray]) -> None:
    letters, length = _letters(texts)
    good = length > 0
    number, digits, places = (np.zeros(len(texts), np.int64) for _ in range(3))
    seen = np.zeros(len(texts), dtype=bool)
    for place, letter in enumerate(letters):
        digit = letter - np.uint8(_ZERO)
        is_digit, is_sign = digit < 10, letter == sign
        allowed = is_digit | (is_sign & ~seen) | (letter == 0)
        if not place:
            allowed |= (letter == _PLUS) | (letter == _MINUS)
        good &= allowed
        number = np.where(is_digit, number * 10 + digit, number)
        digits += is_digit
        places += is_digit & seen
        seen |= is_sign
    # a zero byte inside a text is told from the padding behind it by the count of letters
    good &= ((letters != 0).sum(axis=0) == length) & (digits > 0) & (digits <= _MOST_DIGITS)
    negative = good & (letters[0] == _MINUS) if len(letters) else good
    into[0][:], into[3][:] = good, negative
    into[1][:] = np.where(good, np.where(negative, -number, number), 0)
    into[2][:] = np.where(good, places, 0)


def _letters(texts: ObjectArray) -> tuple[AnyArray, IntArray]:
    """Return the bytes of the texts, one row a position, and their lengths; 0 for what cannot be plain."""
    listed = texts.tolist()
    length = np.fromiter(map(len, listed), np.int64, len(listed))
    length[length > _WIDTH] = 0
    if not all(map(str.isascii, listed)):
        foreign = ~np.fromiter(map(str.isascii, listed), bool, len(listed))
        texts, length = np.where(foreign, "", texts), np.where(foreign, 0, length)
    width = int(length.max(initial=0))
    if not width:
        return np.zeros((0, len(texts)), np.uint8), length
    padded = texts.astype(f"S{width}")
    return np.ascontiguousarray(padded.view(np.uint8).reshape(len(texts), width).T), length
