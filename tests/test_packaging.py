"""The project installs whole, and its lower bounds are the ones that are tested."""

import ast
import re
import sys
import tomllib
from pathlib import Path

ROOT = Path(__file__).parents[1]
PROJECT = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))


def test_every_package_is_installed():
    found = {".".join(p.parent.relative_to(ROOT).parts) for p in ROOT.glob("earthwork/**/__init__.py")}
    assert set(PROJECT["tool"]["setuptools"]["packages"]) == {*found, "earthwork_cli"}


def test_every_file_that_is_no_module_is_installed():
    data = {
        file
        for package, patterns in PROJECT["tool"]["setuptools"].get("package-data", {}).items()
        for pattern in patterns
        for file in ROOT.joinpath(*package.split(".")).glob(pattern)
    }
    others = {p for p in ROOT.glob("earthwork/**/*") if p.is_file() and p.suffix not in (".py", ".pyc", ".nbi", ".nbc")}
    assert others - data == set()


def test_oldest_releases_are_the_lower_bounds():
    """A bound such as 1.4 is tested with a release 1.4.x; ruff and mypy are tools, run with the newest only."""
    pins = dict(
        re.findall(r"^([\w-]+)==([\d.]+)$", (ROOT / ".ci" / "oldest.txt").read_text(encoding="utf-8"), flags=re.M)
    )
    project = PROJECT["project"]
    needs = [*project["dependencies"], *project["optional-dependencies"]["test"]]
    for need in needs:
        name, bound = need.split(">=")
        if name in ("ruff", "mypy"):
            continue
        assert name in pins, f"{name} has no line in .ci/oldest.txt"
        assert pins[name].startswith(bound), f"{name}: {bound} in pyproject.toml, {pins[name]} in .ci/oldest.txt"


#: Modules that come with a declared dependency, which needs them itself.
_COME_WITH = {
    "affine": "rasterio",
    "PIL": "matplotlib",
    "dateutil": "pandas",
    "pydantic_core": "pydantic",
    "dask": "distributed",
    "markupsafe": "jinja2",
}
_CALLED = {"ot": "POT"}


def _imported(*folders):
    """Top names of all modules imported in folders, anywhere in their files."""
    for folder in folders:
        for file in ROOT.glob(f"{folder}/**/*.py"):
            # Benchmarks measure against what is there; the browser has an environment of its own in .ci.
            if {"benchmarks", "browser"} & set(file.parts):
                continue
            for node in ast.walk(ast.parse(file.read_text(encoding="utf-8"))):
                if isinstance(node, ast.Import):
                    yield from (alias.name.split(".")[0] for alias in node.names)
                elif isinstance(node, ast.ImportFrom) and not node.level and node.module:
                    yield node.module.split(".")[0]


def _undeclared(folders, extras):
    project = PROJECT["project"]
    needs = [*project["dependencies"], *(n for e in extras for n in project["optional-dependencies"][e])]
    declared = {re.split(r"[>=\[]", n)[0].lower() for n in needs}
    local = {p.stem for folder in folders for p in ROOT.glob(f"{folder}/**/*.py")}
    known = set(sys.stdlib_module_names) | {"earthwork", "earthwork_cli", "tests"} | local
    return {
        name
        for name in set(_imported(*folders)) - known
        if _CALLED.get(name, _COME_WITH.get(name, name)).lower() not in declared
    }


def test_the_library_imports_only_what_it_declares():
    assert _undeclared(["earthwork", "cli"], ["cluster"]) == set()


def test_the_tests_import_only_what_they_declare():
    assert _undeclared(["tests", "samples", "docs"], ["test"]) == set()
