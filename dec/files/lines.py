"""Lines of a text in memory, taken apart by whole-array steps: where they start, how many words each has."""

import warnings
from collections.abc import Callable
from dataclasses import dataclass, replace
from functools import cached_property
from typing import NoReturn

import numpy as np

from dec.arrays import AnyArray, BoolArray, FloatArray, IntArray
from dec.errors import InputError

__all__ = ["TextLines", "parsed_numbers", "whole_numbers"]

_NEWLINE, _RETURN, _BLANK = 10, 13, 32


@dataclass(frozen=True)
class TextLines:
    """A text and its lines. Words are runs of bytes above 32; lines end with LF, CR counts as a blank.

    Attributes
    ----------
    name : str
        What the file is called, for messages.
    data : uint8 array, shape (n_bytes,)
        The text; the last line ends with LF.
    first_line : int
        Number of the first line, where the text is the end of a file.
    newlines : int64 array or None
        Where the file has its line ends, if some of them were blanked to join lines.
    """

    name: str
    data: AnyArray
    first_line: int = 1
    newlines: IntArray | None = None

    @classmethod
    def of(cls, name: str, text: bytes, *, comment: bytes = b"", first_line: int = 1) -> "TextLines":
        """Return the lines of a text; what follows the comment sign is blanked, so that no position moves."""
        if not text.endswith(b"\n"):
            text += b"\n"
        return cls(name, np.frombuffer(text, dtype=np.uint8), first_line)._without_comments(comment)

    def _without_comments(self, sign: bytes) -> "TextLines":
        signs = np.flatnonzero(self.data == sign[0]) if sign else np.empty(0, np.int64)
        if not len(signs):
            return self
        line, first = np.unique(np.searchsorted(self.ends, signs), return_index=True)
        return self.blanked(signs[first], self.ends[line])

    def blanked(self, starts: IntArray, ends: IntArray) -> "TextLines":
        """Return the text with blanks from each start up to its end; no position moves, spans may not overlap."""
        data = self.data.copy()
        data[_inside(len(data), starts, ends)] = _BLANK
        return replace(self, data=data)

    def joined(self, sign: bytes) -> "TextLines":
        """Return the text with each line that ends in the sign made one with the next; line numbers stay."""
        at = self.ends - 1
        at[self.data[at] == _RETURN] -= 1
        goes_on = (at >= self.starts) & (self.data[at] == sign[0])
        if not goes_on.any():
            return self
        return replace(self.blanked(at[goes_on], self.ends[goes_on] + 1), newlines=self.ends)

    @cached_property
    def ends(self) -> IntArray:
        """Position of the LF that ends each line; int64 array of shape (n_lines,)."""
        return np.flatnonzero(self.data == _NEWLINE)

    @cached_property
    def starts(self) -> IntArray:
        """Position of the first byte of each line; int64 array of shape (n_lines,)."""
        return np.concatenate([[0], self.ends[:-1] + 1]).astype(np.int64)

    @cached_property
    def word_starts(self) -> IntArray:
        """Position of the first byte of each word; int64 array of shape (n_words,)."""
        solid = self.data > _BLANK
        first = solid.copy()
        first[1:] &= ~solid[:-1]
        return np.flatnonzero(first)

    @cached_property
    def word_offsets(self) -> IntArray:
        """Line i has the words from entry i to entry i + 1; int64 array of shape (n_lines + 1,)."""
        return np.concatenate([[0], np.searchsorted(self.word_starts, self.ends)]).astype(np.int64)

    @cached_property
    def words(self) -> IntArray:
        """Number of words on each line; int64 array of shape (n_lines,)."""
        return np.diff(self.word_offsets)

    def number(self, line: int) -> int:
        """Line number as an editor shows it."""
        before = line if self.newlines is None else np.searchsorted(self.newlines, self.starts[line])
        return self.first_line + int(before)

    def place(self, line: int) -> str:
        """Where a line stands: ``part.obj line 907``."""
        return f"{self.name} line {self.number(line)}"

    def text(self, line: int) -> str:
        """One line as text, for messages; at most 60 characters."""
        raw = self.data[self.starts[line] : self.ends[line]].tobytes().decode("utf-8", "replace").strip()
        return raw if len(raw) <= 60 else raw[:57] + "..."

    def starting_with(self, keyword: bytes) -> BoolArray:
        """True for lines whose first word is the keyword; bool array of shape (n_lines,)."""
        has = self.words > 0
        first = np.zeros(len(self.ends), dtype=np.int64)
        first[has] = self.word_starts[self.word_offsets[:-1][has]]
        room = first + len(keyword) < len(self.data)
        found = has & room
        for shift, byte in enumerate(keyword):
            found[found] = self.data[first[found] + shift] == byte
        found[found] = self.data[first[found] + len(keyword)] <= _BLANK
        return found

    def only(self, chosen: BoolArray | IntArray) -> "Chosen":
        """Return the chosen lines as a text of their own."""
        lines: IntArray = np.flatnonzero(chosen) if chosen.dtype == np.bool_ else chosen.astype(np.int64)
        return Chosen(self, lines, self.data[_inside(len(self.data), self.starts[lines], self.ends[lines] + 1)])


@dataclass(frozen=True, slots=True)
class Chosen:
    """Some lines of a text, in order: line i of this was line ``lines[i]`` of the whole."""

    whole: TextLines
    lines: IntArray
    data: AnyArray

    def as_lines(self) -> TextLines:
        """The chosen lines as a text of their own; line numbers start at 1 there."""
        return TextLines(self.whole.name, self.data)

    def numbers(self) -> tuple[FloatArray, IntArray]:
        """All numbers on the chosen lines.

        Returns
        -------
        numbers : float64 array, shape (total,)
        offsets : int64 array, shape (n_chosen + 1,)
            Line i holds ``numbers[offsets[i]:offsets[i + 1]]``.

        Raises
        ------
        InputError
            If a word is not a number; the message gives its line.
        """
        own = self.as_lines()
        offsets = own.word_offsets if len(self.data) else np.zeros(1, dtype=np.int64)
        return self._parse(own, int(offsets[-1])), offsets

    def table(self, width: int, what: str) -> FloatArray:
        """The first numbers of each chosen line.

        Parameters
        ----------
        width : int
            How many numbers each line must have at least.
        what : str
            What a line stands for, in messages ("a point").

        Returns
        -------
        float64 array, shape (n_chosen, width)

        Raises
        ------
        InputError
            If a line has fewer numbers, or a word is not a number.
        """
        numbers, offsets = self.numbers()
        short = np.flatnonzero(np.diff(offsets) < width)
        if len(short):
            line = int(self.lines[short[0]])
            message = f"{self.whole.place(line)}: {what} needs {width} numbers, found {self.whole.text(line)!r}"
            raise InputError(message)
        table: FloatArray = numbers[offsets[:-1, None] + np.arange(width)]
        return table

    def _parse(self, own: TextLines, count: int) -> FloatArray:
        # a text of digits is parsed by NumPy in one call; it warns, and will one day raise, at the first other word
        numbers = parsed_numbers(self.data.tobytes(), "f8")
        if numbers is None or len(numbers) != count:
            self._refuse_first_word(own)
        return numbers

    def _refuse_first_word(self, own: TextLines) -> NoReturn:
        for line, (start, end) in enumerate(zip(own.starts, own.ends, strict=True)):
            for word in own.data[start:end].tobytes().split():
                try:
                    float(word)
                    good = b"_" not in word
                except ValueError:
                    good = False
                if not good:
                    text = word.decode("utf-8", "replace")
                    message = f"{self.whole.place(int(self.lines[line]))}: a number must stand here, found {text!r}"
                    raise InputError(message)
        message = f"{self.whole.name}: the numbers cannot be told apart; write one blank between them"
        raise InputError(message)


def parsed_numbers(text: bytes, kind: str) -> AnyArray | None:
    r"""The numbers of a text separated by blanks and line ends; None where a word is no number.

    Parameters
    ----------
    text : bytes
    kind : str
        NumPy type, "f8" or "i8".

    Returns
    -------
    array of that type, or None

    Examples
    --------
    >>> parsed_numbers(b"1 2.5\n3", "f8"), parsed_numbers(b"1 x", "f8")
    (array([1. , 2.5, 3. ]), None)
    """
    if not text.strip():
        return np.empty(0, dtype=kind)  # NumPy would make a number of it
    with warnings.catch_warnings():
        # NumPy before 2.3 warns at a word that is no number, later ones raise
        warnings.simplefilter("error", DeprecationWarning)
        try:
            return np.fromstring(text, dtype=kind, sep=" ")
        except (DeprecationWarning, ValueError):
            return None


def _inside(length: int, starts: IntArray, ends: IntArray) -> BoolArray:
    mark = np.zeros(length + 1, dtype=np.int8)
    mark[starts] += 1
    mark[ends] -= 1
    return np.cumsum(mark[:-1], dtype=np.int8) > 0


def whole_numbers(values: FloatArray, what: str, place: Callable[[int], str]) -> IntArray:
    """The numbers as int64, all of them whole.

    Parameters
    ----------
    values : float64 array, shape (n,)
    what : str
        What a number is, in messages.
    place : callable
        Takes the index of a number to the words that say where it stands.

    Raises
    ------
    InputError
        If one is not a whole number below 2**53; the message gives its place and value.

    Examples
    --------
    >>> whole_numbers(np.array([1.0, 2.0]), "a corner", "part.off number {}".format)
    array([1, 2])
    """
    good = np.abs(values) < 2.0**53
    good[good] = values[good] == np.trunc(values[good])
    if not good.all():
        first = int(np.argmin(good))
        message = f"{place(first)}: {what} must be a whole number, found {values[first]}"
        raise InputError(message)
    return values.astype(np.int64)
