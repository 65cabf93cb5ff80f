"""Compound files: what is written reads back, here and in another reader."""

from __future__ import annotations

import io

import olefile
import pytest
from hypothesis import given
from hypothesis import strategies as st

from steelyard.addin.excel.cfb import HEADER_FATS, SECTOR, Tree, read_compound, write_compound
from steelyard.core.errors import SteelyardError

# Lengths around every limit of the format: mini sectors of 64, sectors of 512, streams from 4096 on.
LENGTHS = st.sampled_from([0, 1, 63, 64, 65, 511, 512, 513, 4095, 4096, 4097, 70_000])
STREAMS = st.builds(lambda length, byte: bytes([byte]) * length, LENGTHS, st.integers(0, 255))
NAMES = st.text("abcXYZ_09é", min_size=1, max_size=31)
TREES = st.dictionaries(NAMES, STREAMS | st.dictionaries(NAMES, STREAMS, max_size=4), max_size=20).filter(
    lambda tree: len({name.upper() for name in tree}) == len(tree)
)


def in_order(tree: Tree) -> Tree:
    return {name: in_order(part) if isinstance(part, dict) else part for name, part in sorted(tree.items())}


@given(TREES)
def test_reads_back(tree):
    assert in_order(read_compound(write_compound(tree))) == in_order(tree)


@given(TREES)
def test_olefile_reads_the_same_without_complaint(tree):
    file = olefile.OleFileIO(io.BytesIO(write_compound(tree)), raise_defects=olefile.DEFECT_INCORRECT)
    paths = {tuple(path): file.openstream(path).read() for path in file.listdir()}
    wanted = {}
    for name, part in tree.items():
        inner = {(name, child): stream for child, stream in part.items()} if isinstance(part, dict) else None
        wanted |= {(name,): part} if inner is None else inner
    assert paths == wanted
    assert file.parsing_issues == []


@pytest.mark.parametrize("content", [b"", b"PK\x03\x04" + bytes(600), bytes(600)])
def test_something_else_is_refused(content):
    with pytest.raises(SteelyardError, match="no compound file"):
        read_compound(content)


def test_a_chain_that_runs_in_a_circle_is_refused():
    whole = bytearray(write_compound({"long": bytes(5000)}))
    first_link = SECTOR + 4  # the second number of the allocation table: the stream's first sector
    whole[first_link : first_link + 4] = (1).to_bytes(4, "little")
    with pytest.raises(SteelyardError, match="damaged"):
        read_compound(bytes(whole))


def test_too_large_is_refused():
    with pytest.raises(SteelyardError, match="too large"):
        write_compound({"huge": bytes(SECTOR * 128 * HEADER_FATS)})
