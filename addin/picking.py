"""The cell function that draws item numbers."""

from __future__ import annotations

from steelyard.addin.catalogue import Cells
from steelyard.addin.cells import cell
from steelyard.addin.words import Count, Lot, Seed
from steelyard.core.picking import pick


@cell(
    group="explain",
    help="Random item numbers to draw from a lot, one per cell downwards; the same for the same seed.",
    example="=SY_PICK(800,50,7)",
)
def SY_PICK(lot: Lot, n: Count, seed: Seed) -> Cells:
    """Return item numbers to draw, one per row."""
    return [[number] for number in pick(lot, n, seed)]
