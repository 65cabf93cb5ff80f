"""Run mypy in strict mode over the three packages: ``python tests/typecheck.py``.

mypy does not see packages that an editable install maps from folders of another name, so it runs over
a temporary tree ``steelyard/{core,addin,workbooks}`` laid out as the packages are installed.
"""

import shutil
import subprocess
import sys
import tempfile
from pathlib import Path

ROOT = Path(__file__).resolve().parent.parent
PACKAGES = ("core", "addin", "workbooks")
NO_CACHES = shutil.ignore_patterns("__pycache__")


def main() -> int:
    """Type-check a copy of the packages and return mypy's exit code."""
    with tempfile.TemporaryDirectory(prefix="steelyard-types-") as tree:
        for package in PACKAGES:
            # Copies, not links: making a link on Windows needs rights that few users have.
            shutil.copytree(ROOT / package, Path(tree, "steelyard", package), ignore=NO_CACHES)
        command = [sys.executable, "-m", "mypy", "--config-file", ROOT / "pyproject.toml"]
        command += ["--cache-dir", ROOT / ".mypy_cache", "--namespace-packages", "--explicit-package-bases"]
        return subprocess.run([*command, "steelyard"], cwd=tree, check=False).returncode


if __name__ == "__main__":
    sys.exit(main())
