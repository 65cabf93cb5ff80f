"""What the README says of functions and files is what is there."""

from __future__ import annotations

import re
from pathlib import Path

from steelyard.addin import SY_POWER, SY_RATE_FOR, SY_SIZE, SY_SMALLEST, call
from steelyard.workbooks.cli import COMMANDS
from steelyard.workbooks.formula_tree import read_formula

ROOT = Path(__file__).resolve().parents[2]
TEXT = (ROOT / "README.md").read_text(encoding="utf-8")


def test_the_lists_are_the_catalogues():
    """Renew them with ``python tests/workbooks/readme.py``."""
    from readme import renewed

    assert renewed(TEXT) == TEXT


def test_the_table_of_cells_is_true():
    plan = SY_SMALLEST("binomial", 0.01, 0.05, 0.05, 0.9)
    assert f"`{plan}`".replace("|", "\\|") in TEXT
    assert f"{SY_SIZE(plan):.4f} |" in TEXT
    assert f"{SY_POWER(plan, 0.05):.4f} |" in TEXT
    assert f"{SY_RATE_FOR(plan, 0.5):.4f} |" in TEXT
    for name, more in (("NATIVE", ["B1"]), ("EXPRESSION", [])):
        assert call(name, [plan, *more]) in TEXT


def test_every_formula_can_be_read():
    for formula in re.findall(r"`=(SY_[A-Z_]+\([^`]*\))`", TEXT):
        assert read_formula(formula)


def test_every_command_is_named():
    assert [command.name for command in COMMANDS if f"steelyard {command.name}" not in TEXT] == []


def test_pictures_are_there_and_small():
    pictures = re.findall(r"!\[[^\]]+\]\(([^)]+)\)", TEXT)
    assert len(pictures) == 2
    assert all((ROOT / picture).stat().st_size < 200_000 for picture in pictures)
