"""Renew the lists of functions and kinds in the README: ``python tests/workbooks/readme.py``."""

from __future__ import annotations

import re
from pathlib import Path

from steelyard.workbooks.catalogue_text import markdown

README = Path(__file__).resolve().parents[2] / "README.md"
LIST = re.compile(r"(?<=<!-- functions -->\n).*?(?=<!-- /functions -->)", re.DOTALL)


def renewed(text: str) -> str:
    """Return the README with the lists as the catalogue has them now."""
    return LIST.sub(lambda _: f"\n{markdown()}\n\n", text)


if __name__ == "__main__":
    README.write_text(renewed(README.read_text(encoding="utf-8")), encoding="utf-8")
