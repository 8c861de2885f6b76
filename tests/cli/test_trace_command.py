"""calib trace on the command line."""

import pytest


def test_back_from_a_result(worked, tmp_path):
    picture = tmp_path / "way.svg"
    out = worked("trace", "result", "U1", "--run", 3, "--to", picture).out
    assert "standard lot A-1" in out
    assert "curve 1" in out
    assert picture.read_bytes().startswith(b"<?xml")
    told = worked("trace", "result", "U1", "--run", 3, "--json").json
    assert told["schema"] == "calib-trace-1"
    assert {"source": "run 1", "target": "curve 1"} in told["steps"]


@pytest.mark.parametrize("kind", [("lot", "A-1"), ("curve", "1"), ("layout", "header-block")])
def test_forward_from_a_thing(worked, kind):
    told = worked("trace", *kind, "--json").json
    assert told["schema"] == "calib-affected-1"
    assert set(told["runs"]) >= {1, 3}
    assert f"{' '.join(kind)}: {len(told['runs'])} runs" in worked("trace", *kind).out


def test_what_is_not_there_is_refused_in_one_line(worked):
    assert "there is no lot 'none'" in worked.refused("trace", "lot", "none")
    assert "known are result, lot" in worked.refused("trace", "moon", "1")
