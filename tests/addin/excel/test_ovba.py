"""VBA projects: compression against another reader, and modules replaced, added and dropped."""

from __future__ import annotations

import zipfile

import pytest
from hypothesis import given
from hypothesis import strategies as st
from oletools.olevba import VBA_Parser, decompress_stream

from steelyard.addin.excel import ovba
from steelyard.addin.excel.cfb import read_compound, write_compound
from steelyard.addin.excel.xlam import VBA_PROJECT, _xlwings_file
from steelyard.core.errors import SteelyardError

TEXTS = st.lists(
    st.sampled_from([b"Function ", b"\r\n", b"x", b"    ", b"SY_POWER = ", b"End "]), max_size=2000
)


@pytest.fixture(scope="module")
def template() -> bytes:
    """The VBA project inside xlwings' add-in template."""
    with zipfile.ZipFile(_xlwings_file("quickstart_addin.xlam")) as package:
        return package.read(VBA_PROJECT)


@given(TEXTS.map(b"".join) | st.binary(max_size=300))
def test_compression_reads_back(data):
    packed = ovba.compress(data)
    assert ovba.decompress(packed) == data
    if data:
        assert bytes(decompress_stream(bytearray(packed))) == data


def test_a_chunk_that_does_not_shrink_is_stored_as_it_is():
    state, noise = 1, bytearray()
    for _ in range(4096):
        state = state * 69069 + 1 & 0xFFFFFFFF
        noise.append(state >> 24)
    packed = ovba.compress(bytes(noise))
    assert len(packed) == 1 + 2 + 4096
    assert ovba.decompress(packed) == bytes(decompress_stream(bytearray(packed))) == bytes(noise)


# [MS-OVBA] 3.2.1 to 3.2.3, from memory: nothing repeats, some repeats, all repeats.
EXAMPLES = {
    b"abcdefghijklmnopqrstuv.": "0119b000616263646566676800696a6b6c6d6e6f70007172737475762e",
    b"#aaabcdefaaaaghijaaaaaklaaamnopqaaaaaaaaaaaarstuvwxyzaaa": (
        "012fb000236161616263646582660070616768696a013808616b6c00306d6e6f70067102"
        "7004107273747576107778797a003c"
    ),
    b"a" * 73: "0103b002614500",
}


@pytest.mark.parametrize("text", EXAMPLES)
def test_examples_of_the_specification(text):
    assert ovba.decompress(bytes.fromhex(EXAMPLES[text])) == text
    assert len(ovba.compress(text)) == len(EXAMPLES[text]) // 2


def test_an_unknown_compression_is_refused():
    with pytest.raises(SteelyardError, match="unknown compression"):
        ovba.decompress(b"\x02abc")


def test_modules_are_replaced_added_and_dropped(template):
    before = ovba.sources(template)
    new = {
        "xlwings": 'Attribute VB_Name = "xlwings"\n',
        "extra": 'Attribute VB_Name = "extra"\nSub A()\nEnd Sub\n',
    }
    after = ovba.sources(ovba.rebuild(template, "Other", new, drop=("Module1",)))
    assert list(before) == ["ThisWorkbook", "Dictionary", "xlwings", "Sheet2", "Module1"]
    assert list(after) == ["ThisWorkbook", "Dictionary", "xlwings", "Sheet2", "extra"]
    assert after["extra"] == new["extra"].replace("\n", "\r\n")
    assert all(after[name] == before[name] for name in ("ThisWorkbook", "Dictionary", "Sheet2"))


def test_kept_modules_keep_every_byte_with_their_caches(template):
    old, new = read_compound(template)["VBA"], read_compound(ovba.rebuild(template, "Other", {}))["VBA"]
    assert {name: part for name, part in new.items() if name != "dir"} == {
        name: part for name, part in old.items() if name != "dir"
    }


def test_a_project_rebuilt_as_it_was_lists_the_same(template):
    old = read_compound(template)
    new = read_compound(ovba.rebuild(template, "MyAddin", {}))
    assert ovba.decompress(new["VBA"]["dir"]) == ovba.decompress(old["VBA"]["dir"])
    assert new["PROJECT"].rstrip() == old["PROJECT"].rstrip()
    assert new["PROJECTwm"] == old["PROJECTwm"]


def test_the_project_text_names_every_module(template):
    project = ovba.rebuild(template, "Other", {"extra": "Sub A()\nEnd Sub\n"}, drop=("Module1",))
    lines = read_compound(project)["PROJECT"].decode().split("\r\n")
    assert lines[1:7] == [
        *("Document=ThisWorkbook/&H00000000", "Class=Dictionary", "Module=xlwings"),
        *("Document=Sheet2/&H00000000", "Module=extra", 'Name="Other"'),
    ]
    assert "extra=0, 0, 0, 0, C" in lines
    assert not any("Module1" in line for line in lines)


def test_another_reader_finds_the_same_modules(template):
    project = ovba.rebuild(template, "Other", {"extra": "Sub A()\nEnd Sub\n"}, drop=("Module1",))
    found = {
        name.rpartition(".")[0]: code for _, _, name, code in VBA_Parser("x", data=project).extract_macros()
    }
    assert found == ovba.sources(project)


@pytest.mark.parametrize(("tree", "missing"), [({}, "no storage VBA"), ({"VBA": {}}, "no stream dir")])
def test_a_project_without_its_parts_is_refused(tree, missing):
    with pytest.raises(SteelyardError, match=missing):
        ovba.sources(write_compound(tree))
