"""calib audit, action and verify on the command line."""


def test_the_lists_on_screen_as_page_and_as_json(worked, tmp_path):
    page = tmp_path / "audit.html"
    outcome = worked("audit", "--to", page)
    assert outcome.code == 0
    assert "Runs without an approval in force: 3" in outcome.out
    assert "store sound" in outcome.out
    assert "Rejected curves and why" in page.read_text()
    told = worked("audit", "--json").json
    assert told["schema"] == "calib-audit-1"
    assert {each["key"] for each in told["lists"]} >= {"without-review", "signals", "chain"}
    assert "end the name in .html" in worked.refused("audit", "--to", tmp_path / "a.doc")


def test_an_action_from_open_to_closed(worked):
    opened = worked("action", "open", "lot", "A-1", "--what", "certificate withdrawn", "--by", "QM")
    assert opened.out.startswith("action 1 opened: ")
    assert "open" in worked("action", "list").out
    assert "certificate withdrawn" in worked("action", "show", 1).out
    closed = worked("action", "close", 1, "--correction", "new lot", "--effect", "check 99 %", "--by", "QM")
    assert closed.out == "action 1 closed by QM\n"
    assert worked("action", "list", "--open", "--json").json["actions"] == []
    assert "closed already" in worked.refused("action", "close", 1, "--correction", "x", "--effect", "y")


def test_verify_keeps_a_dated_result(worked):
    outcome = worked("verify", "--by", "QM")
    assert outcome.code == 0
    assert "DIFFERS" not in outcome.out
    assert "none differ" in outcome.out.splitlines()[-1]
    (kept,) = worked("verify", "--list", "--json").json["verifications"]
    assert (kept["passed"], kept["by"]) == (True, "QM")
