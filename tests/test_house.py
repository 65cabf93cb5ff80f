"""The rules of the house: which way imports run, what the top level holds, and what no file may say."""

import ast
import re
import shlex
import shutil
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest
from packaging.requirements import Requirement

ROOT = Path(__file__).resolve().parent.parent
MODULES = sorted(
    path.relative_to(ROOT).as_posix()
    for package in ("core", "addin", "workbooks")
    for path in (ROOT / package).rglob("*.py")
)
INSIDE_CALC = ("addin/calc/component.py", "addin/calc/pipe.py")  # run by the Python of LibreOffice
LONGEST_MODULE = 350

# What a module may import besides the standard library and its own package, by the longest path that fits.
MAY_IMPORT = {
    "core": {"numpy", "scipy"},
    "addin": {"steelyard.core", "numpy"},
    "addin/excel": {"steelyard.core", "xlwings"},
    "addin/calc": {"steelyard.core"},
    "addin/calc/component.py": {"uno", "unohelper", "com", "steelyard_pipe"},
    "addin/calc/pipe.py": set(),
    "workbooks": {"steelyard.core", "steelyard.addin", "openpyxl", "numpy"},
}

TOP_LEVEL = {
    *("README.md", "DEVELOPERS.md", "CHANGELOG.md", "LICENSE", "pyproject.toml", "requirements.lock"),
    *("addin", "core", "tests", "workbooks"),
}

# A file that holds one of these would work on one machine only, or would send people to one server.
ONE_MACHINE_ONLY = re.compile(
    r"""(?<![\w.])/(?:work|tmp|home|root|Users)/\w   # an absolute path of somebody's machine
      | \b[A-Za-z]:\\{1,2}Users\b
      | \b(?:pypi|pythonhosted|debian|npmjs)\.(?:org|com)\b  # the host of a package index
      | --(?:extra-)?index-url
    """,
    re.VERBOSE,
)


def tracked() -> list[str]:
    """Return the files under version control, as paths below the top level."""
    if shutil.which("git") is None or not (ROOT / ".git").exists():
        pytest.skip("needs a git checkout")
    command = ["git", "-C", str(ROOT), "ls-files", "-z"]
    listing = subprocess.run(command, check=True, capture_output=True, text=True, encoding="utf-8").stdout
    return [name for name in listing.split("\0") if name and (ROOT / name).exists()]


def imported(path: str) -> set[str]:
    """Return the full names of the modules that the module at this path imports, anywhere in it."""
    package = ["steelyard", *Path(path).parent.parts]
    names: set[str] = set()
    for node in ast.walk(ast.parse((ROOT / path).read_text(encoding="utf-8"))):
        if isinstance(node, ast.Import):
            names |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            base = package[: len(package) - node.level + 1] if node.level else []
            origin = ".".join([*base, *filter(None, [node.module])])
            # "from steelyard import core" imports the package core, not a name of steelyard.
            names |= (
                {f"steelyard.{alias.name}" for alias in node.names} if origin == "steelyard" else {origin}
            )
    return names


def may_import(path: str) -> set[str]:
    """Return what the most specific rule lets this module import."""
    rule = max((rule for rule in MAY_IMPORT if f"{path}/".startswith(f"{rule}/")), key=len)
    own = set() if path in INSIDE_CALC else {f"steelyard.{path.partition('/')[0]}"}
    return own | MAY_IMPORT[rule]


def within(name: str, packages: set[str]) -> bool:
    return any(name == package or name.startswith(package + ".") for package in packages)


@pytest.mark.parametrize("path", MODULES)
def test_imports_run_one_way(path):
    allowed = may_import(path) | set(sys.stdlib_module_names)
    assert {name for name in imported(path) if not within(name, allowed)} == set()


@pytest.mark.parametrize("path", MODULES)
def test_modules_are_short_and_say_what_they_are_for(path):
    source = (ROOT / path).read_text(encoding="utf-8")
    assert ast.get_docstring(ast.parse(source)), "the module has no docstring"
    assert source.count("\n") <= LONGEST_MODULE


@pytest.mark.parametrize("path", INSIDE_CALC)
def test_what_runs_inside_calc_is_python_3_8(path):
    """An old LibreOffice brings Python 3.8 along."""
    ast.parse((ROOT / path).read_text(encoding="utf-8"), feature_version=(3, 8))


def test_the_top_level_holds_what_it_should():
    names = {name.partition("/")[0] for name in tracked()}
    assert {name for name in names if not name.startswith(".")} == TOP_LEVEL


def test_no_file_belongs_to_one_machine():
    found = []
    for name in tracked():
        if (ROOT / name) == Path(__file__):
            continue
        lines = (ROOT / name).read_bytes().decode("utf-8", errors="ignore").splitlines()
        found += [
            f"{name}:{n}: {line[:100]}" for n, line in enumerate(lines, 1) if ONE_MACHINE_ONLY.search(line)
        ]
    assert found == []


def readme_commands() -> dict[str, str]:
    """Return the set-up commands of the README by the program that they end with."""
    lines = (ROOT / "README.md").read_text(encoding="utf-8").splitlines()
    commands = [line for line in lines if " -m venv .venv && " in line]
    system = {"python3": "posix", "py": "windows"}
    return {
        f"{system[line.split()[0]]} {'test' if 'pytest' in line.rpartition('&&')[2] else 'demo'}": line
        for line in commands
    }


@pytest.mark.parametrize("job", ["demo", "test"])
def test_the_readme_command_has_a_windows_form(job):
    commands = readme_commands()
    windows = commands[f"posix {job}"].replace("python3 ", "py ", 1).replace(".venv/bin/", ".venv\\Scripts\\")
    assert commands[f"windows {job}"] == windows


def test_both_readme_commands_set_up_alike():
    commands = readme_commands()
    setup = commands["posix demo"].rpartition(" && ")[0]
    assert commands["posix test"].rpartition(" && ")[0] == setup
    assert "--no-build-isolation" in shlex.split(setup)


def test_the_lock_satisfies_every_requirement():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    wanted = [*project["project"]["dependencies"], *project["project"]["optional-dependencies"]["test"]]
    wanted += project["build-system"]["requires"]
    lock = (ROOT / "requirements.lock").read_text(encoding="utf-8")
    locked = re.findall(r"^([\w.-]+)==([^\s;]+)", lock, re.MULTILINE)
    for requirement in map(Requirement, wanted):
        versions = [version for name, version in locked if name == requirement.name]
        assert versions, f"{requirement.name} is not in requirements.lock"
        assert all(requirement.specifier.contains(version) for version in versions), requirement


def test_every_locked_file_has_a_hash():
    lock = (ROOT / "requirements.lock").read_text(encoding="utf-8")
    entries = re.split(r"^(?=[\w.-]+==)", lock, flags=re.MULTILINE)[1:]
    assert entries
    assert [entry for entry in entries if "--hash=sha256:" not in entry] == []
