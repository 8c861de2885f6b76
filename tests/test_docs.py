"""What the README promises: the two commands of a fresh clone, and a word on every command."""

import re
from pathlib import Path

import pytest

from calib.cli.main import COMMANDS

README = (Path(__file__).parents[1] / "README.md").read_text(encoding="utf-8")
SH_BLOCKS = re.findall(r"^```sh\n(.*?)^```", README, flags=re.MULTILINE | re.DOTALL)


def test_the_first_command_runs_the_demo_and_the_second_the_tests():
    demo, tests = SH_BLOCKS[:2]
    assert "calib demo" in demo
    assert "pytest" in tests
    for block in (demo, tests):
        assert "pip install" in block  # whole on a fresh clone with nothing but Python
        assert len(block.strip().splitlines()) == 1


@pytest.mark.parametrize("command", COMMANDS)
def test_the_readme_names_every_command(command):
    assert re.search(rf"\bcalib {command}\b", README)


def test_every_file_of_the_sample_runs_that_the_readme_names_is_there():
    named = set(re.findall(r"\bsample_runs/[\w./-]*\w", README))
    assert named
    assert [name for name in named if not (Path(__file__).parents[1] / name).exists()] == []
