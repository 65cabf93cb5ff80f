"""Read the modules of a VBA project and rebuild the project with other ones.

From [MS-OVBA]: the compression (2.4.1), the ``dir`` stream that lists the modules (2.3.4.2), the text
streams ``PROJECT`` and ``PROJECTwm`` (2.3.1, 2.3.3). A module stream holds a cache of compiled code, which
a reader must ignore because ``_VBA_PROJECT`` says version 0xFFFF, and from an offset on the compressed
source. Modules that are not replaced keep every byte.
"""

from __future__ import annotations

import re
import struct
from collections.abc import Collection, Mapping
from dataclasses import dataclass
from typing import TypeAlias

from steelyard.addin.excel.cfb import Tree, read_compound, write_compound
from steelyard.core.errors import SteelyardError

CODE_PAGE = "cp1252"
CHUNK = 4096

# Record numbers of the dir stream.
PROJECT_NAME, PROJECT_VERSION, MODULE_COUNT, END = 0x04, 0x09, 0x0F, 0x10
MODULE_NAME, MODULE_NAME_UNICODE, STREAM_NAME, STREAM_NAME_UNICODE = 0x19, 0x47, 0x1A, 0x32
DOC_TEXT, DOC_TEXT_UNICODE, SOURCE_OFFSET, HELP_CONTEXT, COOKIE = 0x1C, 0x48, 0x31, 0x1E, 0x2C
PROCEDURAL, MODULE_END = 0x21, 0x2B

Record: TypeAlias = tuple[int, bytes]


def decompress(data: bytes) -> bytes:
    """Return the text of a compressed stream.

    Examples
    --------
    >>> decompress(compress(b"abcabcabcabc"))
    b'abcabcabcabc'
    """
    if data[:1] != b"\x01":
        msg = "the VBA project holds a stream of an unknown compression"
        raise SteelyardError(msg)
    out, at = bytearray(), 1
    while at < len(data):
        (header,) = struct.unpack_from("<H", data, at)
        end = at + 3 + (header & 0x0FFF)
        chunk = data[at + 2 : end]
        out += _expand(chunk) if header & 0x8000 else chunk
        at = end
    return bytes(out)


def _expand(chunk: bytes) -> bytes:
    out, at = bytearray(), 0
    while at < len(chunk):
        flags = chunk[at]
        at += 1
        for bit in range(8):
            if at >= len(chunk):
                break
            if not flags >> bit & 1:
                out.append(chunk[at])
                at += 1
                continue
            (token,) = struct.unpack_from("<H", chunk, at)
            at += 2
            length_bits = 16 - _offset_bits(len(out))
            start = len(out) - 1 - (token >> length_bits)
            for i in range((token & (1 << length_bits) - 1) + 3):  # a copy may read what it has just written
                out.append(out[start + i])
    return bytes(out)


def compress(data: bytes) -> bytes:
    """Return the data compressed as the VBA storage wants it: chunks of 4096 bytes, longest match first."""
    chunks = (data[at : at + CHUNK] for at in range(0, len(data), CHUNK))
    return b"\x01" + b"".join(map(_compress_chunk, chunks))


def _compress_chunk(chunk: bytes) -> bytes:
    tokens = _tokens(chunk)
    body = b"".join(
        bytes([sum(1 << bit for bit, token in enumerate(group) if len(token) == 2)]) + b"".join(group)
        for group in (tokens[at : at + 8] for at in range(0, len(tokens), 8))
    )
    if len(body) <= CHUNK:
        return struct.pack("<H", 0xB000 | len(body) - 1) + body
    if len(chunk) < CHUNK:  # only a whole chunk may be stored as it is
        msg = "a VBA module can not be compressed"
        raise SteelyardError(msg)
    return struct.pack("<H", 0x3000 | CHUNK - 1) + chunk


def _tokens(chunk: bytes) -> list[bytes]:
    """Return a chunk as single bytes and two-byte references to what stands before them."""
    tokens: list[bytes] = []
    at = 0
    while at < len(chunk):
        length_bits = 16 - _offset_bits(at)
        length, offset = _longest_match(chunk, at, (1 << length_bits) + 2)
        if length:
            tokens.append(struct.pack("<H", (offset - 1) << length_bits | length - 3))
        else:
            tokens.append(chunk[at : at + 1])
        at += length or 1
    return tokens


def _longest_match(chunk: bytes, at: int, longest: int) -> tuple[int, int]:
    """Return length (0, or at least 3) and distance of the longest text before `at` that goes on there."""
    longest = min(longest, len(chunk) - at)
    length = offset = 0
    wanted = 3
    while wanted <= longest:
        found = chunk.rfind(chunk[at : at + wanted], 0, at + wanted - 1)
        if found < 0:
            break
        length, offset = wanted, at - found
        while length < longest and chunk[found + length] == chunk[at + length]:
            length += 1
        wanted = length + 1
    return length, offset


def _offset_bits(position: int) -> int:
    """Return how many bits of a reference hold the distance, at this place of a chunk."""
    return max(4, (position - 1).bit_length())


@dataclass(frozen=True, slots=True)
class _Module:
    """A module: its records in the dir stream, and its stream (cache and compressed source)."""

    records: tuple[Record, ...]
    stream: bytes

    @classmethod
    def of(cls, name: str, source: str) -> _Module:
        """Return a new procedural module."""
        narrow, wide = name.encode(CODE_PAGE), name.encode("utf-16-le")
        records = (
            *((MODULE_NAME, narrow), (MODULE_NAME_UNICODE, wide)),
            *((STREAM_NAME, narrow), (STREAM_NAME_UNICODE, wide)),
            *((DOC_TEXT, b""), (DOC_TEXT_UNICODE, b""), (SOURCE_OFFSET, bytes(4)), (HELP_CONTEXT, bytes(4))),
            *((COOKIE, b"\xff\xff"), (PROCEDURAL, b""), (MODULE_END, b"")),
        )
        return cls(records, compress(_encoded(source)))

    @property
    def name(self) -> str:
        return dict(self.records)[MODULE_NAME].decode(CODE_PAGE)

    @property
    def stream_name(self) -> str:
        return dict(self.records)[STREAM_NAME].decode(CODE_PAGE)

    @property
    def source(self) -> str:
        (offset,) = struct.unpack("<I", dict(self.records)[SOURCE_OFFSET])
        return decompress(self.stream[offset:]).decode(CODE_PAGE)

    def with_source(self, source: str) -> _Module:
        records = tuple((k, bytes(4) if k == SOURCE_OFFSET else v) for k, v in self.records)
        return _Module(records, compress(_encoded(source)))


def _encoded(source: str) -> bytes:
    lines = source.rstrip("\r\n").splitlines()
    return "".join(f"{line}\r\n" for line in lines).encode(CODE_PAGE)


def sources(project: bytes) -> dict[str, str]:
    """Return the source of every module of a ``vbaProject.bin``, in the project's order."""
    _, modules = _read_modules(_storage(read_compound(project)))
    return {module.name: module.source for module in modules}


def rebuild(project: bytes, name: str, new: Mapping[str, str], drop: Collection[str] = ()) -> bytes:
    """Return a ``vbaProject.bin`` of another name, with modules replaced, added or dropped.

    Parameters
    ----------
    project : bytes
        The project to start from; its references, its protection and all other modules are kept.
    name : str
        Name of the new project.
    new : mapping of str to str
        Source by module name; a module that the project does not have is added.
    drop : collection of str
        Modules to leave out.
    """
    tree = read_compound(project)
    head, old = _read_modules(_storage(tree))
    kept = [module for module in old if module.name not in drop]
    modules = [module.with_source(new[module.name]) if module.name in new else module for module in kept]
    added = [_Module.of(key, source) for key, source in new.items() if key not in {m.name for m in kept}]
    modules += added
    names = [module.name for module in modules]
    listed = _head_records(head, name, len(modules)) + [r for m in modules for r in m.records] + [(END, b"")]
    tree["VBA"] = {
        **{module.stream_name: module.stream for module in modules},
        "_VBA_PROJECT": _storage(tree)["_VBA_PROJECT"],
        "dir": compress(_dir_bytes(listed)),
    }
    text = _stream(tree, "PROJECT").decode(CODE_PAGE)
    tree["PROJECT"] = _project_text(text, name, drop, [m.name for m in added]).encode(CODE_PAGE)
    tree["PROJECTwm"] = b"".join(map(_both_spellings, names)) + b"\0\0"
    return write_compound(tree)


def _storage(tree: Tree) -> Tree:
    storage = tree.get("VBA")
    if not isinstance(storage, dict):
        msg = "the VBA project has no storage VBA"
        raise SteelyardError(msg)
    return storage


def _stream(tree: Tree, name: str) -> bytes:
    stream = tree.get(name)
    if not isinstance(stream, bytes):
        msg = f"the VBA project has no stream {name}"
        raise SteelyardError(msg)
    return stream


def _read_modules(storage: Tree) -> tuple[list[Record], list[_Module]]:
    """Return the records before the modules, and the modules."""
    head: list[Record] = []
    blocks: list[list[Record]] = []
    for record in _dir_records(decompress(_stream(storage, "dir"))):
        if record[0] == MODULE_NAME:
            blocks.append([])
        if record[0] != END:
            (blocks[-1] if blocks else head).append(record)
    named = (_Module(tuple(block), b"") for block in blocks)
    return head, [_Module(m.records, _stream(storage, m.stream_name)) for m in named]


def _dir_records(data: bytes) -> list[Record]:
    records, at = [], 0
    while at < len(data):
        kind, size = struct.unpack_from("<HI", data, at)
        if kind == PROJECT_VERSION:
            size = 6  # the one record whose size field lies: it says 4
        records.append((kind, data[at + 6 : at + 6 + size]))
        at += 6 + size
    return records


def _dir_bytes(records: list[Record]) -> bytes:
    return b"".join(
        struct.pack("<HI", kind, 4 if kind == PROJECT_VERSION else len(value)) + value
        for kind, value in records
    )


def _head_records(head: list[Record], name: str, modules: int) -> list[Record]:
    changed = {PROJECT_NAME: name.encode(CODE_PAGE), MODULE_COUNT: struct.pack("<H", modules)}
    return [(kind, changed.get(kind, value)) for kind, value in head]


def _project_text(text: str, name: str, drop: Collection[str], added: list[str]) -> str:
    """Return the PROJECT stream with the new name and module list; window places stand at its end."""
    declared = re.compile(r"(?:Module|Class|Document|BaseClass)=([^/\r\n]+)")
    lines: list[str] = []
    for line in text.rstrip().split("\r\n"):
        match = declared.match(line)
        if (match and match[1] in drop) or line.partition("=")[0] in drop:
            continue
        if line.startswith("Name="):
            lines += [f"Module={module}" for module in added]
            line = f'Name="{name}"'
        lines.append(line)
    return "\r\n".join([*lines, *(f"{module}=0, 0, 0, 0, C" for module in added), ""])


def _both_spellings(name: str) -> bytes:
    return name.encode(CODE_PAGE) + b"\0" + name.encode("utf-16-le") + b"\0\0"
