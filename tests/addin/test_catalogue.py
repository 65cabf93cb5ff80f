"""The catalogue is the one definition that every host reads: its texts and names must fit them all."""

from __future__ import annotations

import inspect
import re

import pytest

from steelyard import addin
from steelyard.addin import CATALOGUE, call
from steelyard.addin.cells import handed_on

ENTRIES = list(CATALOGUE.values())
CELL_REFERENCE = re.compile(r"[A-Z]{1,3}\d+|R\d*C\d*")


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_texts_fit_the_wizard(entry):
    texts = [entry.help, *(argument.help for argument in entry.arguments)]
    assert all(1 <= len(text) <= 255 and text.endswith((".", "…")) for text in texts)


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_names_are_no_cell_references_and_no_duplicates(entry):
    names = [argument.name.lower() for argument in entry.arguments]
    assert len(set(names)) == len(names)
    assert re.fullmatch(r"SY_[A-Z_]+", entry.name)
    assert not any(CELL_REFERENCE.fullmatch(name.upper()) for name in (entry.name, *names) if len(name) > 1)
    assert entry.calc_name == "SY." + entry.name[3:]
    assert entry.method == entry.name[3:].lower()


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_every_function_is_importable_and_plain(entry):
    function = getattr(addin, entry.name)
    assert function is entry.function
    assert list(inspect.signature(function).parameters) == [argument.name for argument in entry.arguments]
    assert entry.name in entry.example


@pytest.mark.parametrize("entry", ENTRIES, ids=lambda entry: entry.name)
def test_required_arguments_stand_before_optional_ones(entry):
    required = [argument.required for argument in entry.arguments]
    assert required == sorted(required, reverse=True)


def test_call_by_either_name():
    assert call("SY_VERSION", []) == call("version", []) == addin.SY_VERSION()


def test_call_of_an_unknown_name_is_a_refusal():
    assert call("nothing", []) == "SY: there is no function nothing"
    assert handed_on(call("nothing", []))
