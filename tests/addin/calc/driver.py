"""Drive a running LibreOffice for the tests; runs under a Python that has LibreOffice's `uno` module.

Started as ``python driver.py PIPE``: connects to that pipe, then answers JSON lines ``[command, arguments…]``
with ``[true, result]`` or ``[false, error text]``.
"""

import json
import sys
import time

import uno
from com.sun.star.beans import PropertyValue
from com.sun.star.connection import NoConnectException

documents = []


def connect(pipe):
    """Return LibreOffice's component context as soon as it listens."""
    local = uno.getComponentContext()
    resolver = local.ServiceManager.createInstance("com.sun.star.bridge.UnoUrlResolver")
    give_up = time.monotonic() + 60
    while True:
        try:
            return resolver.resolve(f"uno:pipe,name={pipe};urp;StarOffice.ComponentContext")
        except NoConnectException:
            if time.monotonic() > give_up:
                raise
            time.sleep(0.1)


def prop(name, value):
    return PropertyValue(name, 0, value, 0)


def open_(path=None):
    url = uno.systemPathToFileUrl(path) if path else "private:factory/scalc"
    documents.append(desktop.loadComponentFromURL(url, "_blank", 0, (prop("Hidden", True),)))
    return len(documents) - 1


def cells(document, area):
    sheet, _, name = area.rpartition(".")
    sheets = documents[document].Sheets
    return (sheets.getByName(sheet) if sheet else sheets.getByIndex(0)).getCellRangeByName(name)


def put(document, area, rows):
    """Write rows of numbers, texts and formulas (texts that begin with ``=``)."""
    area = cells(document, area)
    if all(isinstance(value, str) for row in rows for value in row):
        area.setFormulaArray(tuple(map(tuple, rows)))
        return
    area.setDataArray(tuple(map(tuple, rows)))  # numbers in full: a formula array rounds them
    for y, row in enumerate(rows):
        for x, value in enumerate(row):
            if str(value).startswith("="):
                area.getCellByPosition(x, y).Formula = value


def typed(document, cell, text):
    """Enter a formula as a user types it, in the language of the user interface."""
    cells(document, cell).getCellByPosition(0, 0).FormulaLocal = text


def array(document, area, formula):
    cells(document, area).setArrayFormula(formula)


def get(document, area):
    """Return rows of values: numbers and texts; an empty cell is an empty text, an error its own text."""
    area = cells(document, area)
    rows = [list(row) for row in area.getDataArray()]
    for y, row in enumerate(rows):
        for x, value in enumerate(row):
            if value is None or value == "":
                rows[y][x] = area.getCellByPosition(x, y).String
    return rows


def formula(document, cell):
    return cells(document, cell).getCellByPosition(0, 0).Formula


def recalculate(document):
    """Calculate every formula anew (as Ctrl+Shift+F9 does) and return the seconds it took."""
    start = time.monotonic()
    documents[document].calculateAll()
    return time.monotonic() - start


def automatic(document, on):
    """Say whether the document calculates by itself."""
    documents[document].enableAutomaticCalculation(on)


def rest(seconds):
    """Do nothing for a while, as a user does between two recalculations."""
    time.sleep(seconds)


def save(document, path, filter_name):
    documents[document].storeToURL(uno.systemPathToFileUrl(path), (prop("FilterName", filter_name),))


def close(document):
    documents[document].close(True)


def functions():
    """Return what the function wizard shows of Steelyard: name to description and arguments."""
    described = {}
    service = manager.createInstance("com.sun.star.sheet.FunctionDescriptions")
    for index in range(service.getCount()):
        properties = {p.Name: p.Value for p in service.getByIndex(index)}
        if str(properties["Name"]).startswith("SY."):
            given = properties.get("Arguments") or ()
            arguments = [[a.Name, a.Description, bool(a.IsOptional)] for a in given]
            described[properties["Name"]] = [properties["Description"], arguments]
    return described


def quit_():
    desktop.terminate()


COMMANDS = {
    "open": open_,
    "put": put,
    "typed": typed,
    "array": array,
    "get": get,
    "formula": formula,
    "recalculate": recalculate,
    "automatic": automatic,
    "rest": rest,
    "save": save,
    "close": close,
    "functions": functions,
    "quit": quit_,
}

if __name__ == "__main__":
    manager = connect(sys.argv[1]).ServiceManager
    desktop = manager.createInstance("com.sun.star.frame.Desktop")
    print(json.dumps([True, None]), flush=True)
    for line in sys.stdin:
        command, *arguments = json.loads(line)
        try:
            reply = [True, COMMANDS[command](*arguments)]
        except Exception as error:  # noqa: BLE001 - the test shall see it
            reply = [False, f"{type(error).__name__}: {error}"]
        print(json.dumps(reply), flush=True)
