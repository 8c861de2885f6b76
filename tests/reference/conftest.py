"""Agreement in digits, noted with each check; `pytest tests/reference --digits` prints the table."""

from __future__ import annotations

from typing import Any

import pytest
from published import Agree, worst_digits


def pytest_addoption(parser: pytest.Parser) -> None:
    parser.addoption("--digits", action="store_true", help="print the worst agreement of each reference case")


@pytest.fixture
def agree(request: pytest.FixtureRequest) -> Agree:
    """agree(case, what, value, expected, at_least): as many digits at least."""

    def check(case: str, what: str, value: Any, expected: Any, at_least: float) -> None:
        reached = worst_digits(value, expected)
        request.node.user_properties.append(("digits", (case, what, reached)))
        assert reached >= at_least, f"{case}, {what}: {value} for {expected}, {reached:.1f} digits"

    return check


def pytest_terminal_summary(terminalreporter: Any, config: pytest.Config) -> None:
    if not config.getoption("--digits", default=False):
        return
    worst: dict[str, dict[str, float]] = {}
    for reports in terminalreporter.stats.values():
        for report in reports:
            for kind, noted in getattr(report, "user_properties", ()):
                if kind == "digits" and report.when == "call":
                    name, what, reached = noted
                    row = worst.setdefault(name, {})
                    row[what] = min(reached, row.get(what, 15.0))
    terminalreporter.section("agreeing digits, worst of each case")
    for name, row in sorted(worst.items()):
        shown = ", ".join(f"{what} {reached:.1f}" for what, reached in row.items())
        terminalreporter.write_line(f"{name:28s} {shown}")
