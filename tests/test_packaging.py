"""The project installs whole, and its lower bounds are the ones that are tested."""

import re
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
