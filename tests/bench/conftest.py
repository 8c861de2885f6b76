import pytest
from noisy_days import ASKING
from small_laboratory import Bench

from calib.bench.register import add_method


@pytest.fixture
def asking(bench: Bench) -> Bench:
    """The bench with a second version of its method, which takes its noise from the history."""
    add_method(bench.store, bench.file("history.toml", ASKING), by="KM")
    return bench
