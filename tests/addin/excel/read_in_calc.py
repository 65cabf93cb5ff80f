"""Open workbooks with macros in LibreOffice; print their modules and what their formulas show, as JSON.

Started as ``python read_in_calc.py SOFFICE PROFILE FILE...`` under a Python that has LibreOffice's `uno`.
"""

import json
import subprocess
import sys
import time

import uno
from com.sun.star.beans import PropertyValue
from com.sun.star.connection import NoConnectException

ALWAYS_EXECUTE_NO_WARN = 4
LOAD = {
    "Hidden": True,
    "MacroExecutionMode": ALWAYS_EXECUTE_NO_WARN,
    "FilterName": "Calc MS Excel 2007 VBA XML",
}


def desktop_of(pipe):
    """Return the desktop of the LibreOffice that listens on this pipe, as soon as it does."""
    local = uno.getComponentContext()
    resolver = local.ServiceManager.createInstance("com.sun.star.bridge.UnoUrlResolver")
    give_up = time.monotonic() + 60
    while True:
        try:
            context = resolver.resolve("uno:pipe,name=" + pipe + ";urp;StarOffice.ComponentContext")
            return context.ServiceManager.createInstanceWithContext("com.sun.star.frame.Desktop", context)
        except NoConnectException:
            if time.monotonic() > give_up:
                raise
            time.sleep(0.1)


def contents(desktop, path):
    """Return a workbook's modules and the results of its formulas in column A, top down."""
    properties = tuple(PropertyValue(name, 0, value, 0) for name, value in LOAD.items())
    document = desktop.loadComponentFromURL(uno.systemPathToFileUrl(path), "_blank", 0, properties)
    document.calculateAll()
    library = document.BasicLibraries.getByName("Steelyard")
    column = [document.Sheets.getByIndex(0).getCellByPosition(0, row) for row in range(40)]
    answer = {
        "modules": {name: library.getByName(name) for name in library.ElementNames},
        "formulas": [cell.String for cell in column if cell.Formula.startswith("=")],
    }
    document.close(True)
    return answer


def main(soffice, profile, *paths):
    pipe = "steelyard-excel-" + str(time.time_ns())
    home = "-env:UserInstallation=" + uno.systemPathToFileUrl(profile)
    listen = "--accept=pipe,name=" + pipe + ";urp;"
    office = subprocess.Popen([soffice, home, "--headless", "--norestore", listen])
    try:
        desktop = desktop_of(pipe)
        print(json.dumps([contents(desktop, path) for path in paths]))
        desktop.terminate()
        office.wait(30)
    finally:
        office.kill()


main(*sys.argv[1:])
