"""The published check values by id, and how far a figure may lie from what a source prints."""

from __future__ import annotations

import csv
from decimal import Decimal
from pathlib import Path

_FILE = Path(__file__).parents[2] / "workbooks" / "data" / "check_values.csv"
ROWS = {row["id"]: row for row in csv.DictReader(_FILE.read_text(encoding="utf-8").splitlines())}


def unit(text: str) -> float:
    """Return one unit of the last digit printed."""
    return float(Decimal(10) ** Decimal(text).as_tuple().exponent)


def label(key: str) -> str:
    """Return a test's id: what was read in its source is told from what is recalled."""
    row = ROWS[key]
    return f"{key} {row['quantity'][:40]}, {row['read_or_memory']}: {row['source'][:60]}"


def agrees(key: str, value: float) -> None:
    """Compare a value with the row's exact figure, and with the published one to the digits it can bear."""
    row = ROWS[key]
    assert abs(value - float(row["computed"])) <= 0.51 * unit(row["computed"])
    differs = abs(value - float(row["published"]))
    if row["agrees_to"].startswith("all"):
        assert differs <= 0.51 * unit(row["published"])
    elif row["agrees_to"].startswith("last digit"):
        assert differs <= 1.51 * unit(row["published"])
