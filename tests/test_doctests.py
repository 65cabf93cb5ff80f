"""The examples in the docstrings are true, module by module.

``pytest --doctest-modules`` would import each module a second time under its folder's name.
"""

import doctest
import importlib
import pkgutil

import pytest

import steelyard.addin
import steelyard.core
import steelyard.workbooks

# Modules that only a spreadsheet program can provide.
HOST_ONLY = {"uno", "unohelper", "com", "pythoncom", "pywintypes", "win32com"}

MODULES = sorted(
    module.name
    for package in (steelyard.core, steelyard.addin, steelyard.workbooks)
    for module in pkgutil.walk_packages(package.__path__, package.__name__ + ".")
    if not module.name.endswith("__main__")
)


@pytest.mark.parametrize("name", ["steelyard.core", "steelyard.addin", "steelyard.workbooks", *MODULES])
def test_examples(name, tmp_path, monkeypatch):
    monkeypatch.chdir(tmp_path)
    try:
        module = importlib.import_module(name)
    except ModuleNotFoundError as error:
        if (error.name or "").partition(".")[0] not in HOST_ONLY:
            raise
        pytest.skip(f"runs inside a spreadsheet program only: no module {error.name}")
    failures, _ = doctest.testmod(module)
    assert failures == 0
