"""What the workbook tests share: saved books as others read them, and Calc as a judge."""

import shutil
import subprocess
import zipfile
from pathlib import Path

import pytest
from openpyxl import load_workbook

RECALCULATE_ALWAYS = """\
<?xml version="1.0" encoding="UTF-8"?>
<oor:items xmlns:oor="http://openoffice.org/2001/registry">
<item oor:path="/org.openoffice.Office.Calc/Formula/Load">
<prop oor:name="OOXMLRecalcMode" oor:op="fuse"><value>0</value></prop>
</item>
</oor:items>
"""


@pytest.fixture
def saved(tmp_path):
    """Save a book, and return it as openpyxl reads its formulas, its values, and its parts."""

    def save(book):
        path = tmp_path / "saved.xlsx"
        book.save(path)
        with zipfile.ZipFile(path) as archive:
            parts = {name: archive.read(name) for name in archive.namelist()}
        return load_workbook(path), load_workbook(path, data_only=True), parts

    return save


@pytest.fixture(scope="session")
def calc_values(tmp_path_factory):
    """Return a function that lets Calc recalculate a workbook, and reads the values it saved."""
    profile = tmp_path_factory.mktemp("profile")
    (profile / "user").mkdir()
    (profile / "user" / "registrymodifications.xcu").write_text(RECALCULATE_ALWAYS, encoding="utf-8")

    def recalculate(path: Path):
        target = tmp_path_factory.mktemp("calculated")
        command = [shutil.which("soffice"), "--headless", f"-env:UserInstallation={profile.as_uri()}"]
        command += ["--convert-to", "xlsx", "--outdir", str(target), str(path)]
        for _ in range(2):  # the first start of a new profile may ask for a second one
            subprocess.run(command, check=False, capture_output=True, timeout=120)
            if (target / path.name).exists():
                break
        return load_workbook(target / path.name, data_only=True)

    return recalculate
