"""A starter site of each unit system, written once, and a way to run the command line in this process."""

import json
import shutil

import pytest
from earthwork_cli.main import main

from earthwork.files.starter import new


@pytest.fixture(scope="session")
def starters(tmp_path_factory):
    base = tmp_path_factory.mktemp("starters")
    return {units: new(base / units, units=units) for units in ("metric", "us")}


@pytest.fixture
def site(starters, tmp_path):
    """A metric starter site of one's own, to be spoilt."""
    return shutil.copytree(starters["metric"].parent, tmp_path / "site") / "site.toml"


@pytest.fixture
def run(capsys):
    """Runs a command line; gives exit code, stdout and stderr."""

    def call(*arguments):
        code = main([str(a) for a in arguments])
        out, err = capsys.readouterr()
        return code, out, err

    return call


@pytest.fixture
def run_json(run):
    """Runs a command with ``--json``; gives the document."""

    def call(*arguments):
        code, out, err = run(*arguments, "--json")
        assert code == 0, err
        return json.loads(out, parse_constant=lambda name: pytest.fail(f"{name} in JSON"))

    return call
