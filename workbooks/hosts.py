"""The commands that connect spreadsheet programs: add-in files, connecting, disconnecting."""

from __future__ import annotations

import argparse
import sys
from pathlib import Path


def addin_file(options: argparse.Namespace) -> int:
    """Write an add-in file, without installing anything."""
    target = Path(options.output or ("steelyard.oxt" if options.program == "calc" else "steelyard.xlam"))
    if options.program == "calc":
        from steelyard.addin.calc.oxt import write_oxt

        write_oxt(target, options.interpreter)
        print("next: open the file with LibreOffice, or use its extension manager", file=sys.stderr)
    else:
        from steelyard.addin.excel.xlam import write_xlam

        write_xlam(target, options.interpreter)
        print("next: put the file into Excel's XLSTART folder on a Windows computer", file=sys.stderr)
    print(target)
    return 0


def connect(options: argparse.Namespace) -> int:
    """Connect Excel or Calc for the current user."""
    if options.program == "calc":
        from steelyard.addin.calc.connect import connect_calc

        lines = connect_calc()
    else:
        from steelyard.addin.excel.connect import connect_excel

        lines = connect_excel()
    print("\n".join(lines))
    return 0


def disconnect(options: argparse.Namespace) -> int:
    """Take the connection back and leave no trace."""
    if options.program == "calc":
        from steelyard.addin.calc.connect import disconnect_calc

        lines = disconnect_calc()
    else:
        from steelyard.addin.excel.connect import disconnect_excel

        lines = disconnect_excel()
    print("\n".join(lines))
    return 0
