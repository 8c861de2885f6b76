"""calib lot: register, prepare, check, list and show."""

import pytest

VOLUMES = ("--taken", 1, "--taken-u", 0.006, "--made-up-to", 100, "--made-up-to-u", 0.05)
MADE = ("--from", "A-1", *VOLUMES, "--prepared-on", "2026-03-20")


@pytest.fixture
def prepared(desk):
    assert desk("lot", "prepare", "W-1", *MADE, "--checked-by", "RS").code == 0
    assert desk("lot", "prepare", "W-2", "--from", "W-1", *VOLUMES, "--prepared-on", "2026-03-21").code == 0
    return desk


def test_a_preparation_tells_what_it_comes_to(desk):
    out = desk("lot", "prepare", "W-1", *MADE).out
    assert out == (
        "prepared solution W-1 registered: 1.0000 mg/L, standard uncertainty 0.0063 mg/L (0.63 %)\n"
    )


def test_the_list_is_a_tree(prepared):
    lines = prepared("lot", "list").out.splitlines()
    assert [line.split("  ")[0] for line in lines[1:2]] == ["A-1"]
    assert lines[2].startswith("  W-1")
    assert "1 mL of A-1 made up to 100 mL" in lines[2]
    assert lines[2].rstrip().endswith("RS")
    assert lines[3].startswith("    W-2")
    assert lines[3].rstrip().endswith("not checked")
    assert "(U 0.4, k = 2)" in lines[1]


def test_a_solution_shows_what_its_uncertainty_is_made_of(prepared):
    out = prepared("lot", "show", "W-2").out
    assert "prepared solution W-2: 1 mL of W-1 made up to 100 mL" in out
    assert "not checked by a second person yet" in out
    assert "common to every level" in out
    assert "certified value of A-1" in out
    assert prepared("lot", "confirm", "W-2", "--by", "RS").out == "preparation of W-2 checked by RS\n"
    assert "checked by RS" in prepared("lot", "show", "W-2").out


def test_json_of_a_solution(prepared):
    shown = prepared("lot", "show", "W-1", "--json").json
    assert (shown["schema"], shown["kind"], shown["unit"]) == ("calib-lot-1", "prepared solution", "mg/L")
    assert (shown["value"], shown["degrees_of_freedom"]) == (1.0, None)
    assert shown["u"] == pytest.approx((0.002**2 + 0.006**2 + 0.0005**2) ** 0.5)
    assert sum(p["share"] for p in shown["parts"]) == pytest.approx(1.0)
    assert [s["name"] for s in shown["prepared_from"]] == ["A-1"]
    assert [s["name"] for s in shown["prepared_from_it"]] == ["W-2"]
    listed = prepared("lot", "list", "--json").json
    assert [s["name"] for s in listed["prepared"]] == ["W-1", "W-2"]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("prepare", "W", "--from", "Z", *VOLUMES), "unknown standard lot 'Z'"),
        (("prepare", "W", *MADE, "--expiry", "soon"), "--expiry 'soon' is no day"),
        (("prepare", "W", *MADE, "--checked-by", "KM"), "a second person has to check it"),
        (("confirm", "W-9"), "unknown standard lot 'W-9'"),
        (("show", "W-9"), "unknown standard lot 'W-9'"),
    ],
)
def test_refusals_leave_the_store_as_it_was(desk, arguments, words):
    assert words in desk.refused("lot", *arguments)
