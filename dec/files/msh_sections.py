"""The sections of an MSH file, and their numbers in order, whether they are written as text or in binary."""

import re
from dataclasses import dataclass, field

import numpy as np

from dec.arrays import AnyArray, FloatArray, IntArray
from dec.errors import InputError
from dec.files.lines import TextLines, parsed_numbers, whole_numbers
from dec.files.sources import Source

__all__ = ["MshFile", "Numbers", "Section"]

_OPENING = re.compile(rb"^\$([A-Za-z]+)[ \t]*\r?\n", re.MULTILINE)


@dataclass(frozen=True, slots=True)
class Section:
    """What stands between ``$Name`` and ``$EndName``: its bytes, and the line of the file where they begin."""

    name: str
    body: bytes
    first_line: int


@dataclass(slots=True)
class Numbers:
    """The numbers of a section, taken one group after the other."""

    place: str
    values: FloatArray | None
    data: bytes
    order: str
    wide: str
    at: int = 0

    def ints(self, count: int) -> IntArray:
        """The next numbers, written as 32-bit integers in binary; int64 array of shape (count,)."""
        return self._whole(count, "i4")

    def sizes(self, count: int) -> IntArray:
        """The next numbers, written as the file's size type in binary; int64 array of shape (count,)."""
        return self._whole(count, self.wide)

    def floats(self, count: int) -> FloatArray:
        """The next numbers as float64 array of shape (count,)."""
        return self._take(count, "f8").astype(np.float64)

    def _whole(self, count: int, kind: str) -> IntArray:
        taken = self._take(count, kind)
        if self.values is None:
            return taken.astype(np.int64)
        return whole_numbers(taken, "a number or count", f"{self.place}, number {{}}".format)

    def _take(self, count: int, kind: str) -> AnyArray:
        size = 1 if self.values is not None else np.dtype(kind).itemsize
        left = (len(self.data) if self.values is None else len(self.values)) - self.at
        if count < 0 or count * size > left:
            message = f"{self.place} promises {count} more numbers, found {left // size}; the copy may be incomplete"
            raise InputError(message)
        start, self.at = self.at, self.at + count * size
        if self.values is not None:
            return self.values[start : self.at]
        return np.frombuffer(self.data, dtype=self.order + kind, count=count, offset=start)


@dataclass(frozen=True)
class MshFile:
    """An MSH file taken into sections.

    Attributes
    ----------
    name : str
    version : str
        "2.2" or "4.1".
    is_text : bool
    order : "<" or ">"
    wide : str
        NumPy type of the file's size type.
    sections : list of Section
    """

    name: str
    version: str
    is_text: bool
    order: str
    wide: str
    sections: list[Section] = field(default_factory=list)

    @classmethod
    def of(cls, source: Source) -> "MshFile":
        """Return the sections of a file of version 2.2 or 4.1.

        Raises
        ------
        InputError
            If it is no such file, or a section has no end.
        """
        sections = _sections(source)
        head = sections[0].body.split(b"\n", 1) if sections and sections[0].name == "MeshFormat" else [b""]
        words = head[0].decode("latin-1").split()
        if len(words) != 3 or words[1] not in ("0", "1") or words[2] not in ("4", "8"):
            message = f"{source.name} must begin with $MeshFormat, version, 0 or 1, and 4 or 8; it does not"
            raise InputError(message)
        version = {"2": "2.2", "2.0": "2.2", "2.1": "2.2", "2.2": "2.2", "4.1": "4.1"}.get(words[0])
        if version is None:
            message = f"{source.name}: MSH version must be 2.2 or 4.1, found {words[0]!r}; save it as one of those"
            raise InputError(message)
        one = head[1][:4] if words[1] == "1" and len(head) > 1 else b"\1\0\0\0"
        if one not in (b"\1\0\0\0", b"\0\0\0\1"):
            message = f"{source.name}: the byte order mark of a binary MSH file must be 1, found {one.hex()}"
            raise InputError(message)
        order = "<" if one[:1] == b"\1" else ">"
        return cls(source.name, version, words[1] == "0", order, f"u{words[2]}", sections)

    def section(self, name: str) -> Section | None:
        """The first section of that name, or None."""
        return next((section for section in self.sections if section.name == name), None)

    def needed(self, name: str) -> Section:
        """The section of that name.

        Raises
        ------
        InputError
            If there is none.
        """
        section = self.section(name)
        if section is None:
            message = f"{self.name} must have a section ${name}, it has {', '.join(s.name for s in self.sections)}"
            raise InputError(message)
        return section

    def numbers(self, section: Section, body: bytes | None = None) -> Numbers:
        """The numbers of a section, or of the part of it given.

        Raises
        ------
        InputError
            If a word of a text file is no number; the message gives its line.
        """
        data = section.body if body is None else body
        place = f"{self.name}: ${section.name}"
        values = parsed_numbers(data, "f8") if self.is_text else None
        if self.is_text and values is None:
            skipped = section.body[: len(section.body) - len(data)].count(b"\n")
            lines = TextLines.of(self.name, data, first_line=section.first_line + skipped)
            lines.only(np.ones(len(lines.ends), dtype=bool)).numbers()
            message = f"{place} must hold numbers only"
            raise InputError(message)
        return Numbers(place, values, data, self.order, self.wide)


def _sections(source: Source) -> list[Section]:
    sections, at, line = [], 0, 1
    while opening := _OPENING.search(source.data, at):
        name = opening[1].decode("ascii")
        line += source.data.count(b"\n", at, opening.end())
        end = source.data.find(b"$End" + opening[1], opening.end())
        if end < 0:
            message = f"{source.name} line {line - 1}: ${name} has no $End{name}; the copy may be incomplete"
            raise InputError(message)
        sections.append(Section(name, source.data[opening.end() : end], line))
        line += source.data.count(b"\n", opening.end(), end)
        at = end + len(opening[1]) + 4
    return sections
