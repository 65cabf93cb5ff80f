"""Connect or disconnect Excel on this Windows; prints JSON. Runs in the Windows Python."""

import json
import sys
import winreg

from steelyard.addin.excel.connect import connect_excel, disconnect_excel
from steelyard.addin.excel.machine import Machine
from steelyard.core.errors import SteelyardError

EXCEL = r"Software\Classes\Excel.Application\CLSID"


def main(step: str) -> None:
    if step == "install-excel":
        winreg.CloseKey(winreg.CreateKey(winreg.HKEY_CURRENT_USER, EXCEL))
    answer = {"startup": str(Machine.this().startup), "lines": [], "refusal": ""}
    try:
        answer["lines"] = disconnect_excel() if step == "disconnect" else connect_excel()
    except SteelyardError as error:
        answer["refusal"] = str(error)
    print(json.dumps(answer))


main(sys.argv[1])
