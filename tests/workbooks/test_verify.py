"""The verification record: published values, challenges, accuracy, and a record that is never overwritten."""

from __future__ import annotations

import dataclasses

import pytest
from openpyxl import load_workbook

from steelyard.workbooks import checking
from steelyard.workbooks.checking import accuracy, challenges, published, through_calc
from steelyard.workbooks.cli import main

PUBLISHED, CHALLENGES = published(), challenges()


@pytest.mark.parametrize("check", PUBLISHED, ids=lambda check: check.name)
def test_published_value(check):
    assert check.verdict == "pass", f"{check.source} ({check.status}): {check.expected}, got {check.computed}"
    assert bool(check.reason) == (check.tolerance > checking.allowed_difference(check.expected))


@pytest.mark.parametrize("check", CHALLENGES, ids=lambda check: check.name)
def test_challenge(check):
    assert check.verdict == "pass", f"{check.formula}: {check.expected}, got {check.computed}"


def test_accuracy_against_whole_number_arithmetic():
    assert [one.verdict for one in accuracy()] == ["pass"] * 3


def test_a_wrong_number_fails():
    check = dataclasses.replace(PUBLISHED[0], computed=PUBLISHED[0].computed + 0.001)
    assert check.verdict == "FAIL"
    assert dataclasses.replace(PUBLISHED[0], through=0.5).program_verdict == "FAIL"


def test_memory_is_never_called_published():
    assert {check.status for check in PUBLISHED} <= {"published, read", "from memory, not seen"}


@pytest.mark.calc
def test_the_spreadsheet_program_gives_the_same_answers():
    found = through_calc([*PUBLISHED, *CHALLENGES])
    assert [check.formula for check in found if check.program_verdict != "pass"] == []


def test_record(tmp_path, capsys, monkeypatch):
    monkeypatch.setattr(checking, "accuracy", lambda: accuracy()[:0] or [checking.Accuracy("x", 1, 0.0, "y")])
    target = tmp_path / "record.xlsx"
    assert main(["verify", "-o", str(target), "--skip-program"]) == 0
    assert f"pass  Published values: {len(PUBLISHED)} of {len(PUBLISHED)} pass" in capsys.readouterr().out
    book = load_workbook(target)
    assert book.sheetnames == ["Record", "Published values", "Challenges", "Accuracy", "Trace", "Files"]
    assert book["Published values"]["A5"].value == PUBLISHED[0].name
    assert main(["verify", "-o", str(target), "--skip-program"]) == 1
    assert "a record is never overwritten" in capsys.readouterr().err


def test_a_failure_is_kept_and_told(tmp_path, capsys, monkeypatch):
    wrong = dataclasses.replace(PUBLISHED[0], computed=0.5)
    monkeypatch.setattr(checking, "published", lambda: [wrong])
    monkeypatch.setattr(checking, "accuracy", lambda: [checking.Accuracy("x", 1, 0.0, "y")])
    target = tmp_path / "record.xlsx"
    assert main(["verify", "-o", str(target), "--skip-program"]) == 1
    assert "FAIL  Published values: 0 of 1 pass" in capsys.readouterr().out
    assert load_workbook(target)["Published values"]["H5"].value == "FAIL"
