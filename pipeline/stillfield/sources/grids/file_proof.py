"""Proof that a gridded file is what its name says and is all there, before anything is read from it.

The NetCDF library reads a classic file that lost its second half without a word and fills in what it finds,
so the size a classic header promises is held against the size on disk.
"""

from __future__ import annotations

import struct
from dataclasses import dataclass
from pathlib import Path
from typing import BinaryIO

from stillfield.errors import WeatherError

_TYPE_BYTES = {1: 1, 2: 1, 3: 2, 4: 4, 5: 4, 6: 8, 7: 1, 8: 2, 9: 4, 10: 8, 11: 8}
_STREAMING = {1: 0xFFFFFFFF, 2: 0xFFFFFFFF, 5: 0xFFFFFFFFFFFFFFFF}


def prove_whole(path: Path) -> None:
    """Refuse a file that is no NetCDF or is cut off.

    Parameters
    ----------
    path : Path
        A file. NetCDF-4 files are only recognised here: their library checks their length itself.

    Raises
    ------
    WeatherError
        If the file is empty, a web page, GRIB, another format, or shorter than its header promises.
    """
    if path.is_dir():
        raise WeatherError("this is a folder, the form of a Zarr store", where=str(path), wanted="NetCDF",
                           cure="The kind of a store is 'zarr'; state weather.kind.")
    size = path.stat().st_size
    with path.open("rb") as stream:
        head = stream.read(512)
        if head.startswith(b"\x89HDF\r\n\x1a\n"):
            return
        if not (head.startswith(b"CDF") and head[3:4] in {b"\x01", b"\x02", b"\x05"}):
            raise _foreign(path, head)
        stream.seek(0)
        try:
            promised = _promised_size(stream)
        except (struct.error, KeyError, IndexError) as fault:
            raise _cut_off(path, size, "a whole header") from fault
    if size < promised:
        raise _cut_off(path, size, f"{promised} bytes, as its header promises")


def _cut_off(path: Path, size: int, wanted: str) -> WeatherError:
    return WeatherError("the file is cut off", where=str(path), got=f"{size} bytes", wanted=wanted,
                        cure="Get it again.")


def _foreign(path: Path, head: bytes) -> WeatherError:
    where = str(path)
    if not head.strip():
        return WeatherError("the file is empty", where=where, cure="Get it again.")
    text = head.lstrip()[:60].lower()
    if text.startswith((b"<!doctype", b"<html", b"<?xml", b"{")):
        return WeatherError(
            "this is a web page or an error message saved as a file", where=where,
            got=repr(head[:40].decode("latin-1")), wanted="NetCDF", cure="Download the data again.",
        )
    if head.startswith(b"GRIB"):
        return WeatherError("this is a GRIB file", where=where, wanted="NetCDF",
                            cure="Its kind is 'grib'; state weather.kind.")
    if head.startswith((b"PK", b"\x1f\x8b")):
        return WeatherError("this is an archive", where=where, wanted="NetCDF", cure="Unpack it.")
    return WeatherError("not a NetCDF file", where=where, got=f"first bytes {head[:8]!r}",
                        wanted="NetCDF classic or NetCDF-4", cure="Check the file; use 'typical-year' for EPW or TMY.")


@dataclass(frozen=True)
class _Classic:
    """Reader of the header of a classic file (NetCDF Users' Guide, "File Format Specifications")."""

    stream: BinaryIO
    version: int

    def integer(self) -> int:
        return int(struct.unpack(">I", self.stream.read(4))[0])

    def count(self) -> int:
        """Non-negative count: 8 bytes in version 5."""
        return self.offset() if self.version == 5 else self.integer()

    def offset(self) -> int:
        """File position or large count, 8 bytes."""
        return int(struct.unpack(">Q", self.stream.read(8))[0])

    def begin(self) -> int:
        return self.integer() if self.version == 1 else self.offset()

    def skip(self, size: int) -> None:
        padded = -(-size // 4) * 4
        if len(self.stream.read(padded)) < size:
            raise struct.error("header ends early")

    def attributes(self) -> None:
        self.integer()
        for _ in range(self.count()):
            self.skip(self.count())
            kind = self.integer()
            self.skip(self.count() * _TYPE_BYTES[kind])


def _promised_size(stream: BinaryIO) -> int:
    version = stream.read(4)[3]
    header = _Classic(stream, version)
    records = header.count()
    header.integer()
    lengths = []
    for _ in range(header.count()):
        header.skip(header.count())
        lengths.append(header.count())
    header.attributes()
    header.integer()
    fixed_ends, record_parts = [stream.tell()], []
    for _ in range(header.count()):
        header.skip(header.count())
        dims = [header.count() for _ in range(header.count())]
        header.attributes()
        kind = header.integer()
        header.count()
        begin = header.begin()
        is_record = bool(dims) and lengths[dims[0]] == 0
        size = _TYPE_BYTES[kind]
        for dim in dims[1 if is_record else 0 :]:
            size *= lengths[dim]
        if is_record:
            record_parts.append((begin, size))
        else:
            fixed_ends.append(begin + size)
    end = max([*fixed_ends, stream.tell()])
    if not record_parts or records in {0, _STREAMING[version]}:
        return end
    # A lone record variable is not padded to four bytes.
    step = record_parts[0][1] if len(record_parts) == 1 else sum(-(-size // 4) * 4 for _, size in record_parts)
    return max(end, *(begin + (records - 1) * step + size for begin, size in record_parts))
