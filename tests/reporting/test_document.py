"""The JSON document: only what JSON knows, and digests of what was read."""

import hashlib
import json
from dataclasses import dataclass
from pathlib import Path

import numpy as np
import pytest

from earthwork.errors import Warning
from earthwork.reporting.document import clean, document, inputs, to_json
from earthwork.results import Result
from earthwork.site import Site
from earthwork.site.model import SiteModel
from earthwork.units import METRIC


def _site(folder: Path) -> Site:
    model = SiteModel.model_validate(
        {
            "site": {"name": "Sänd", "units": "metric"},
            "ground": {"existing": "a.bin", "finished": "big.bin", "limits": "folder"},
            "zones": {"area": "a.bin"},
        }
    )
    return Site(model, METRIC, folder, folder / "site.toml")


@dataclass(frozen=True, kw_only=True)
class _Result(Result):
    def to_dict(self):
        return {
            "a_m3": float("nan"),
            "b": np.float64(2.5),
            "c": (np.int64(3), None),
            "d": np.array([1.0, np.inf]),
            "e": -0.0,
        }


@pytest.fixture
def site(tmp_path):
    (tmp_path / "site.toml").write_text("x")
    (tmp_path / "a.bin").write_bytes(b"abc")
    with open(tmp_path / "big.bin", "wb") as file:
        file.truncate(64_000_000)
    (tmp_path / "folder").mkdir()
    return _site(tmp_path)


def test_nothing_that_json_does_not_know(site):
    made = document("volumes", site, _Result(units=METRIC, warnings=(Warning("x-y", "Look."),)))
    assert made["result"] == {"a_m3": None, "b": 2.5, "c": [3, None], "d": [1.0, None], "e": 0.0}
    assert str(made["result"]["e"]) == "0.0"
    assert made["warnings"] == [{"code": "x-y", "message": "Look."}]
    text = to_json(made)
    assert json.loads(text) == made
    assert '"site": "Sänd"' in text


def test_numbers_that_json_does_not_know_are_an_error_when_they_slip_through():
    with pytest.raises(ValueError, match="Out of range float values are not JSON compliant"):
        to_json({"a": float("nan")})


def test_inputs_once_each_with_digests_of_the_small_ones(site):
    listed = inputs(site)
    assert [f["path"] for f in listed] == ["site.toml", "a.bin", "big.bin", "folder"]
    # FIPS 180-4, the example "abc".
    assert listed[1] == {
        "path": "a.bin",
        "bytes": 3,
        "sha256": "ba7816bf8f01cfea414140de5dae2223b00361a396177a9cb410ff61f20015ad",
    }
    assert listed[2] == {"path": "big.bin", "bytes": 64_000_000, "sha256": None}
    assert listed[3] == {"path": "folder", "bytes": None, "sha256": None}


def test_check_and_report_hash_everything(site):
    digest = hashlib.sha256(bytes(64_000_000)).hexdigest()
    assert inputs(site, hash_all=True)[2]["sha256"] == digest
    assert document("check", site, _Result(units=METRIC))["inputs"][2]["sha256"] == digest


def test_a_file_that_is_gone_is_listed_without_facts(site):
    (site.directory / "a.bin").unlink()
    assert inputs(site)[1] == {"path": "a.bin", "bytes": None, "sha256": None}


def test_clean_keeps_texts_and_truth():
    assert clean({1: [True, "x", None]}) == {"1": [True, "x", None]}
