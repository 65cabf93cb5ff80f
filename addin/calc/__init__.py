"""The LibreOffice Calc host: cells are typed as ``=SY.POWER(A2;5%)``.

Calc runs its own Python, often another version than the one numpy was installed for. So the work is split:

- ``component.py`` and ``pipe.py`` run inside LibreOffice: standard library only, Python 3.8 syntax.
  They describe the functions to Calc and hand every call to one worker process.
- ``worker.py`` is that process: the interpreter Steelyard is installed for, one JSON line in, one out.
- ``oxt.py`` writes the extension file from the catalogue; ``connect.py`` installs it for the user.
- ``soffice.py`` runs LibreOffice without a window, to recalculate a workbook or to print it.
"""
