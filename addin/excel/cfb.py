"""Read and write compound files, the container that holds the VBA project of a workbook.

The format is [MS-CFB], version 3: a small file system of storages (folders) and streams (files), kept in
sectors of 512 bytes that a file allocation table chains together; streams below 4096 bytes share sectors
in units of 64. Libraries for Python read such files, none adds a stream.
"""

from __future__ import annotations

import struct
from dataclasses import dataclass
from typing import TypeAlias

from steelyard.core.errors import SteelyardError

Tree: TypeAlias = "dict[str, bytes | Tree]"

SIGNATURE = bytes.fromhex("d0cf11e0a1b11ae1")
SECTOR, MINI_SECTOR, CUTOFF = 512, 64, 4096
FREE, END_OF_CHAIN, FAT_SECTOR, NO_ENTRY = 0xFFFFFFFF, 0xFFFFFFFE, 0xFFFFFFFD, 0xFFFFFFFF
STORAGE, STREAM, ROOT = 1, 2, 5
HEADER_FATS = 109
ENTRY = struct.Struct("<64sHBBIII36xIQ")
HEADER = struct.Struct("<8s16x5H6x9I")
UNUSED_ENTRY = ENTRY.pack(b"", 0, 0, 0, NO_ENTRY, NO_ENTRY, NO_ENTRY, 0, 0)


@dataclass(slots=True)
class _Entry:
    """One line of the directory; the links form a binary tree of the names within a storage."""

    name: str
    kind: int
    left: int = NO_ENTRY
    right: int = NO_ENTRY
    child: int = NO_ENTRY
    start: int = 0
    size: int = 0

    def pack(self) -> bytes:
        name = (self.name + "\0").encode("utf-16-le")
        black = 1  # [MS-CFB] 2.6.4 allows a tree of black nodes only
        links = (self.left, self.right, self.child)
        return ENTRY.pack(name, len(name), self.kind, black, *links, self.start, self.size)


def read_compound(data: bytes) -> Tree:
    """Return the storages and streams of a compound file as nested dictionaries.

    Raises
    ------
    SteelyardError
        When the bytes are no compound file of version 3, or it is larger than about 7 MB.
    """
    if data[:8] != SIGNATURE or len(data) < SECTOR:
        msg = "the VBA project is no compound file"
        raise SteelyardError(msg)
    return _Reader(data).tree()


class _Reader:
    def __init__(self, data: bytes) -> None:
        header = HEADER.unpack_from(data)
        _, _, major, _, shift, _, _, _, directory, _, _, minifat, _, _, more_fats = header
        if (major, 1 << shift, more_fats) != (3, SECTOR, 0):
            msg = "the VBA project is a compound file of an unexpected version or size"
            raise SteelyardError(msg)
        self.data = data
        self.fat: tuple[int, ...] = ()
        fats = struct.unpack_from(f"<{HEADER_FATS}I", data, HEADER.size)
        self.fat = _numbers(b"".join(self._sector(n) for n in fats if n != FREE))
        self.minifat = _numbers(self._chain(minifat))
        table = self._chain(directory)
        self.entries = [self._entry(table[i : i + ENTRY.size]) for i in range(0, len(table), ENTRY.size)]
        self.mini = self._chain(self.entries[0].start)

    def _sector(self, number: int) -> bytes:
        return self.data[(number + 1) * SECTOR : (number + 2) * SECTOR]

    def _chain(self, start: int) -> bytes:
        return b"".join(self._sector(n) for n in _links(start, self.fat))

    @staticmethod
    def _entry(raw: bytes) -> _Entry:
        name, length, kind, _, left, right, child, start, size = ENTRY.unpack(raw)
        text = name[: max(length - 2, 0)].decode("utf-16-le")
        return _Entry(text, kind, left, right, child, start, size)

    def _content(self, entry: _Entry) -> bytes | Tree:
        if entry.kind != STREAM:
            return self._siblings(entry.child)
        if entry.size >= CUTOFF:
            return self._chain(entry.start)[: entry.size]
        units = (
            self.mini[n * MINI_SECTOR : (n + 1) * MINI_SECTOR] for n in _links(entry.start, self.minifat)
        )
        return b"".join(units)[: entry.size]

    def _siblings(self, number: int) -> Tree:
        if number == NO_ENTRY:
            return {}
        entry = self.entries[number]
        return {
            **self._siblings(entry.left),
            entry.name: self._content(entry),
            **self._siblings(entry.right),
        }

    def tree(self) -> Tree:
        return self._siblings(self.entries[0].child)


def _numbers(data: bytes) -> tuple[int, ...]:
    return struct.unpack(f"<{len(data) // 4}I", data)


def _links(start: int, table: tuple[int, ...]) -> list[int]:
    """Return the sector numbers of a chain; a chain longer than its table runs in a circle."""
    chain: list[int] = []
    while start < len(table):
        if len(chain) == len(table):
            msg = "the VBA project is a damaged compound file"
            raise SteelyardError(msg)
        chain.append(start)
        start = table[start]
    return chain


def write_compound(tree: Tree) -> bytes:
    """Return a compound file that holds the given storages and streams.

    Examples
    --------
    >>> read_compound(write_compound({"VBA": {"dir": b"abc"}, "PROJECT": b""}))
    {'VBA': {'dir': b'abc'}, 'PROJECT': b''}
    """
    return _Writer(tree).file()


class _Writer:
    def __init__(self, tree: Tree) -> None:
        self.entries: list[_Entry] = []
        self.mini = bytearray()
        self.minifat: list[int] = []
        self.large: list[tuple[_Entry, bytes]] = []
        self._add("Root Entry", ROOT, tree)

    def _add(self, name: str, kind: int, content: bytes | Tree) -> int:
        entry = _Entry(name, kind)
        number = len(self.entries)
        self.entries.append(entry)
        if isinstance(content, bytes):
            self._store(entry, content)
        else:
            numbers = [
                self._add(child, STREAM if isinstance(content[child], bytes) else STORAGE, content[child])
                for child in sorted(content, key=_order)
            ]
            entry.child = self._balance(numbers)
        return number

    def _store(self, entry: _Entry, content: bytes) -> None:
        entry.size = len(content)
        if not content:
            entry.start = END_OF_CHAIN
        elif entry.size >= CUTOFF:
            self.large.append((entry, content))
        else:
            entry.start = len(self.minifat)
            self.mini += _padded(content, MINI_SECTOR)
            self.minifat += _chain_from(entry.start, -(-entry.size // MINI_SECTOR))

    def _balance(self, numbers: list[int]) -> int:
        if not numbers:
            return NO_ENTRY
        middle = len(numbers) // 2
        entry = self.entries[numbers[middle]]
        entry.left = self._balance(numbers[:middle])
        entry.right = self._balance(numbers[middle + 1 :])
        return numbers[middle]

    def file(self) -> bytes:
        """Lay out header, allocation table, large streams, shared sectors, their table, directory."""
        root = self.entries[0]
        root.size = len(self.mini)
        parts = [content for _, content in self.large]
        parts += [bytes(self.mini), _table(self.minifat), bytes(ENTRY.size * len(self.entries))]
        fats = _fats_for(sum(map(_sectors, parts)))
        fat, starts = [FAT_SECTOR] * fats, []
        for part in parts:
            starts.append(len(fat) if part else END_OF_CHAIN)
            fat += _chain_from(len(fat), _sectors(part))
        *large_starts, root.start, minifat_start, directory_start = starts
        for (entry, _), start in zip(self.large, large_starts, strict=True):
            entry.start = start
        directory = b"".join(entry.pack() for entry in self.entries)
        parts[-1] = directory + UNUSED_ENTRY * (-len(self.entries) % (SECTOR // ENTRY.size))
        header = _header(fats, directory_start, minifat_start, _sectors(parts[-2]))
        return header + _table(fat) + b"".join(_padded(part, SECTOR) for part in parts)


def _order(name: str) -> tuple[int, str]:
    """Return the sort key of [MS-CFB] 2.6.4: shorter names first, then by capital letters."""
    return len(name.encode("utf-16-le")), name.upper()


def _chain_from(first: int, length: int) -> list[int]:
    return [*range(first + 1, first + length), END_OF_CHAIN][:length]


def _sectors(content: bytes) -> int:
    return -(-len(content) // SECTOR)


def _padded(content: bytes, unit: int) -> bytes:
    return content + bytes(-len(content) % unit)


def _table(numbers: list[int]) -> bytes:
    """Return an allocation table of whole sectors, the rest of the last one marked as free."""
    full = numbers + [FREE] * (-len(numbers) % (SECTOR // 4))
    return struct.pack(f"<{len(full)}I", *full)


def _fats_for(sectors: int) -> int:
    """Return how many sectors the allocation table of a file takes, its own sectors included."""
    per_sector = SECTOR // 4
    fats = -(-sectors // (per_sector - 1))
    if fats > HEADER_FATS:
        msg = "the VBA project is too large for a compound file without extra tables"
        raise SteelyardError(msg)
    return fats


def _header(fats: int, directory: int, minifat: int, minifat_sectors: int) -> bytes:
    version = (0x3E, 3, 0xFFFE, 9, 6)  # minor, major, byte order, sector and mini sector as powers of 2
    places = (0, fats, directory, 0, CUTOFF, minifat, minifat_sectors, END_OF_CHAIN, 0)
    first_fats = [*range(fats), *[FREE] * (HEADER_FATS - fats)]
    return HEADER.pack(SIGNATURE, *version, *places) + struct.pack(f"<{HEADER_FATS}I", *first_fats)
