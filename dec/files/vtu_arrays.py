"""The data arrays of a VTK XML file: text, base64 or raw bytes, compressed or not, with promised and found lengths."""

import base64
import binascii
import lzma
import zlib
from collections.abc import Mapping
from dataclasses import dataclass
from xml.etree.ElementTree import Element

import numpy as np

from dec.arrays import AnyArray
from dec.errors import InputError
from dec.files.lines import parsed_numbers
from dec.files.sources import whole_count

__all__ = ["TYPES", "ArrayReader"]

TYPES = {
    "Int8": "i1", "UInt8": "u1", "Int16": "i2", "UInt16": "u2", "Int32": "i4", "UInt32": "u4", "Int64": "i8",
    "UInt64": "u8", "Float32": "f4", "Float64": "f8",
}  # fmt: skip
_COMPRESSORS = ("vtkZLibDataCompressor", "vtkLZMADataCompressor")


@dataclass(frozen=True, slots=True)
class ArrayReader:
    """Takes DataArray elements to arrays of native byte order.

    Attributes
    ----------
    name : str
        Name of the file, for messages.
    order : "<" or ">"
    header : str
        NumPy type of the lengths that stand before the data.
    compressor : str
        Name as in the file; empty for none.
    appended : bytes
        The block of appended data, after its underscore.
    is_raw : bool
        Whether that block is bytes rather than base64.
    """

    name: str
    order: str
    header: str
    compressor: str
    appended: bytes
    is_raw: bool

    @classmethod
    def of(cls, name: str, attributes: Mapping[str, str], appended: bytes, *, is_raw: bool) -> "ArrayReader":
        """Return a reader for a file whose root element has these attributes.

        Raises
        ------
        InputError
            If the byte order, the header type or the compressor is not one of those known.
        """
        order = attributes.get("byte_order", "LittleEndian")
        header = attributes.get("header_type", "UInt32")
        compressor = attributes.get("compressor", "")
        if order not in ("LittleEndian", "BigEndian") or header not in ("UInt32", "UInt64"):
            message = f"{name}: byte order {order} with header type {header} is not known"
            raise InputError(message)
        if compressor and compressor not in _COMPRESSORS:
            message = f"{name}: data compressed with {compressor} are not read; save with zlib or uncompressed"
            raise InputError(message)
        return cls(name, "<" if order == "LittleEndian" else ">", TYPES[header], compressor, appended, is_raw)

    def read(self, element: Element, what: str, rows: int) -> AnyArray:
        """The values of a DataArray.

        Parameters
        ----------
        element : Element
        what : str
            What it is, in messages.
        rows : int
            How many rows are promised.

        Returns
        -------
        array of a native NumPy type, shape (rows,) or (rows, components)

        Raises
        ------
        InputError
            If the values cannot be decoded, or their number is not the one promised.
        """
        kind, form = element.get("type", ""), element.get("format", "ascii")
        if kind not in TYPES:
            message = f"{self.name}: {what} is of type {kind or 'unknown'}, it must be one of {', '.join(TYPES)}"
            raise InputError(message)
        components = self._components(element, what)
        if form == "ascii":
            values = self._from_text(element.text or "", TYPES[kind], what)
        else:
            room = rows * components * np.dtype(TYPES[kind]).itemsize
            values = self._from_bytes(self._payload(element, form, what, room), TYPES[kind], what)
        return self._shaped(values, components, what, rows)

    def _components(self, element: Element, what: str) -> int:
        text = element.get("NumberOfComponents") or "1"
        components = whole_count(text, f"{self.name}: components of {what}") if text.isdecimal() else 0
        if components < 1:
            message = f"{self.name}: {what} has {text} components; a number from 1 must stand there"
            raise InputError(message)
        return components

    def _shaped(self, values: AnyArray, components: int, what: str, rows: int) -> AnyArray:
        if len(values) != rows * components:
            message = (
                f"{self.name}: {what} promises {rows} rows of {components}, found {len(values)} numbers; "
                "the copy may be incomplete"
            )
            raise InputError(message)
        return values.reshape(rows, components) if components > 1 else values

    def _from_text(self, text: str, kind: str, what: str) -> AnyArray:
        values = parsed_numbers(text.encode("ascii", "replace"), "f8" if kind[0] == "f" else "i8")
        if values is None:
            message = f"{self.name}: {what} must hold numbers, found {_odd_word(text)!r}"
            raise InputError(message)
        if kind[0] == "f":
            return values
        limits = np.iinfo(kind)
        if len(values) and not limits.min <= int(values.min()) <= int(values.max()) <= min(limits.max, 2**63 - 2):
            message = f"{self.name}: {what} holds numbers from {values.min()} to {values.max()}, beyond its type {kind}"
            raise InputError(message)
        return values.astype(kind)

    def _from_bytes(self, data: bytes, kind: str, what: str) -> AnyArray:
        size = np.dtype(kind).itemsize
        if len(data) % size:
            message = f"{self.name}: {what} has {len(data)} bytes, no multiple of {size}; the copy may be incomplete"
            raise InputError(message)
        return np.frombuffer(data, dtype=self.order + kind).astype(kind, copy=False)

    def _payload(self, element: Element, form: str, what: str, room: int) -> bytes:
        if form == "binary":
            coded = "".join((element.text or "").split()).encode("ascii", "replace")
            return self._decoded(_Base64(coded, 0), what, room)
        if form != "appended":
            message = f"{self.name}: {what} has format {form!r}, it must be ascii, binary or appended"
            raise InputError(message)
        text = element.get("offset", "").strip()
        start = whole_count(text, f"{self.name}: offset of {what}") if text.isdecimal() else None
        if start is None or start > len(self.appended):
            message = (
                f"{self.name}: {what} starts at {text or 'no'} of {len(self.appended)} appended bytes; "
                "the copy may be incomplete"
            )
            raise InputError(message)
        return self._decoded((_Raw if self.is_raw else _Base64)(self.appended, start), what, room)

    def _decoded(self, stream: "_Raw | _Base64", what: str, room: int) -> bytes:
        try:
            return self._uncompressed(stream, what, room) if self.compressor else self._plain(stream, what)
        except MemoryError:
            message = f"{self.name}: {what} does not fit into memory; save fewer cells or fields in one file"
            raise InputError(message) from None
        except (binascii.Error, zlib.error, lzma.LZMAError, EOFError, ValueError, OverflowError) as error:
            if isinstance(error, InputError):
                raise
            message = f"{self.name}: {what} cannot be decoded ({error}); the copy may be incomplete"
            raise InputError(message) from None

    def _plain(self, stream: "_Raw | _Base64", what: str) -> bytes:
        size = np.dtype(self.header).itemsize
        promised = int(self._numbers(stream.peek(size), what, 1)[0])
        data = stream.after(size, promised)
        if len(data) < promised:
            self._refuse_short(what, promised, len(data))
        return data

    def _uncompressed(self, stream: "_Raw | _Base64", what: str, room: int) -> bytes:
        size = np.dtype(self.header).itemsize
        n_blocks = int(self._numbers(stream.peek(size), what, 1)[0])
        if not n_blocks:
            return b""
        if n_blocks > len(stream.data):
            self._refuse_short(what, n_blocks, len(stream.data))
        head = self._numbers(stream.peek(size * (3 + n_blocks)), what, 3 + n_blocks)
        lengths = [int(head[1])] * (n_blocks - 1) + [int(head[2]) or int(head[1])]
        if sum(lengths) > room:  # known before a byte is unpacked, so that a small file cannot fill the memory
            message = (
                f"{self.name}: {what} has room for {room} bytes, its packed blocks promise {sum(lengths)}; "
                "the file may be damaged"
            )
            raise InputError(message)
        packed = [int(n) for n in head[3:]]
        data = stream.after_own(size * (3 + n_blocks), sum(packed))
        if len(data) < sum(packed):
            self._refuse_short(what, sum(packed), len(data))
        ends = np.cumsum([0, *packed])
        return b"".join(
            self._unpacked(data[ends[i] : ends[i + 1]], lengths[i], what) for i in range(n_blocks)
        )  # fmt: skip

    def _unpacked(self, data: bytes, promised: int, what: str) -> bytes:
        # never more than promised, so that a small file cannot fill the memory
        if self.compressor == _COMPRESSORS[0]:
            block = zlib.decompressobj().decompress(data, promised + 1)
        else:
            block = lzma.LZMADecompressor().decompress(data, promised + 1)
        if len(block) != promised:
            self._refuse_short(what, promised, len(block))
        return block

    def _numbers(self, data: bytes, what: str, count: int) -> AnyArray:
        if len(data) < count * np.dtype(self.header).itemsize:
            self._refuse_short(what, count * np.dtype(self.header).itemsize, len(data))
        return np.frombuffer(data, dtype=self.order + self.header, count=count)

    def _refuse_short(self, what: str, promised: int, found: int) -> None:
        message = f"{self.name}: {what} promises {promised} bytes, found {found}; the copy may be incomplete"
        raise InputError(message)


@dataclass(frozen=True, slots=True)
class _Raw:
    """Bytes as they are, from a position."""

    data: bytes
    start: int

    def peek(self, size: int) -> bytes:
        return self.data[self.start : self.start + size]

    def after(self, header: int, size: int) -> bytes:
        return self.data[self.start + header : self.start + header + size]

    after_own = after


@dataclass(frozen=True, slots=True)
class _Base64:
    """Bytes written as base64, from a position in the text; a header may have been encoded on its own."""

    data: bytes
    start: int

    def peek(self, size: int) -> bytes:
        return self._decode(self.start, size)[:size]

    def after(self, header: int, size: int) -> bytes:
        # encoded on its own, a header ends with padding, and nothing but the header comes out of it
        if len(self._decode(self.start, header)) == header:
            return self.after_own(header, size)
        return self._decode(self.start, header + size)[header : header + size]

    def after_own(self, header: int, size: int) -> bytes:
        return self._decode(self.start + _characters(header), size)[:size]

    def _decode(self, start: int, size: int) -> bytes:
        text = self.data[start : start + _characters(size)]
        return base64.b64decode(text[: len(text) // 4 * 4], validate=True)


def _odd_word(text: str) -> str:
    """Return the first word that is no number."""
    for word in text.split():
        try:
            float(word)
        except ValueError:
            return word[:40]
    return "a number written in another way"


def _characters(size: int) -> int:
    return -(-size // 3) * 4
