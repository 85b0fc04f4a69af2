"""CSV tables: numbers that come back, names that do no harm."""

import pandas as pd
import pytest

from earthwork.files.tables import harmless, write_csv


@pytest.mark.parametrize("name", ["=1+1", "+cmd", "-2+3", "@SUM(A1)", "\t=1", "\r=1", "  =1", "\n=x"])
def test_formulas_are_disarmed(name):
    assert harmless(name) == "'" + name


@pytest.mark.parametrize("name", ["lot 7", "a=b", "7-2", "", "Phase 1 (north)"])
def test_plain_names_stay(name):
    assert harmless(name) == name


def test_a_table_comes_back_as_it_was(tmp_path):
    table = pd.DataFrame(
        {"zone": ['a "b", c', "=x"], "cut_m3": [-1234.5678901, float("nan")], "n": [3, 4], "note": [None, "y"]}
    )
    write_csv(tmp_path / "t.csv", table)
    text = (tmp_path / "t.csv").read_text()
    assert text == 'zone,cut_m3,n,note\n"a ""b"", c",-1234.5678901,3,\n\'=x,,4,y\n'
    back = pd.read_csv(tmp_path / "t.csv")
    assert back["cut_m3"][0] == -1234.5678901


def test_other_than_ascii_text_is_marked_for_spreadsheets(tmp_path):
    write_csv(tmp_path / "t.csv", pd.DataFrame({"zone": ["Hügel"]}))
    assert (tmp_path / "t.csv").read_bytes().startswith(b"\xef\xbb\xbf")
    assert list(pd.read_csv(tmp_path / "t.csv").columns) == ["zone"]


def test_lists_and_truth_values(tmp_path):
    write_csv(tmp_path / "t.csv", pd.DataFrame({"flags": [["a", "b"], []], "ready": [True, False], "z": [-0.0, 0.0]}))
    assert (tmp_path / "t.csv").read_text() == "flags,ready,z\na; b,true,0\n,false,0\n"
