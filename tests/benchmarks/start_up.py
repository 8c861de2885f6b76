"""What a command costs beside bare Python: `calib --help`, and logging one 96-well file.

Run: python tests/benchmarks/start_up.py
"""

import os
import shutil
import sys
import tempfile
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parent))
from interleaved import measure, process, ratios

SAMPLES = Path(__file__).parents[2] / "sample_runs"
PLATE = SAMPLES / "season" / "PP-2" / "PP-2_2026-03-02.csv"
COMMAND = ("-c", "import sys; from calib.cli.main import run; sys.exit(run(sys.argv[1:]))")
# A process that imports what logging cannot do without and makes one fit.
BARE_FIT = """
import numpy as np
from scipy.optimize import curve_fit
import sqlalchemy.orm
x = np.repeat([0.25, 0.4, 0.7, 1.2, 2.0, 3.6, 6.4, 20.0], 3)
f = lambda x, a, d, c, b: d + (a - d) / (1 + (x / c) ** b)
y = f(x, 2.0, 0.08, 0.6, 1.1) * (1 + 0.03 * np.sin(np.arange(24)))
curve_fit(f, x, y, p0=(2.0, 0.1, 0.5, 1.0))
"""


def prepared_store(folder: Path) -> Path:
    """A store with instrument, lot and method, but no run."""
    import tomllib

    from calib.bench.register import LotRecord, add_instrument, add_lot, add_method
    from calib.store import open_store

    path = folder / "prepared.db"
    laboratory = tomllib.loads((SAMPLES / "laboratory.toml").read_text(encoding="utf-8"))
    with open_store(path) as store:
        plate = next(i for i in laboratory["instrument"] if i["name"] == "PP-2")
        add_instrument(
            store,
            "PP-2",
            kind=plate["kind"],
            serial=plate["serial"],
            location=plate["location"],
            response_ceiling=plate["response_ceiling"],
            utc_offset_minutes=plate["utc_offset_minutes"],
            by="bench",
        )
        for lot in laboratory["standard_lot"]:
            add_lot(store, LotRecord(**{k: lot.get(k) for k in LotRecord.__slots__}), by="bench")
        add_method(store, SAMPLES / "methods" / "toxin-plate.toml", by="bench")
    return path


def main() -> None:
    """Measure and print the table."""
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        prepared = prepared_store(folder)

        def log_plate() -> None:
            for old in folder.glob("run.db*"):
                old.unlink()
            shutil.copy(prepared, folder / "run.db")
            process(*COMMAND, "--store", str(folder / "run.db"), "log", str(PLATE), env=dict(os.environ))()

        seconds = measure(
            {
                "python -c pass": process("-c", "pass"),
                "calib --help": process(*COMMAND, "--help"),
                "one curve_fit": process("-c", BARE_FIT),
                "calib log, 96 wells": log_plate,
            }
        )
    print(f"{'':24}{'median ms':>10}{'ratio':>8}   lowest–highest   against")
    for name, reference in (("calib --help", "python -c pass"), ("calib log, 96 wells", "one curve_fit")):
        median, low, high = ratios(seconds, name, reference)
        milliseconds = 1e3 * sorted(seconds[name])[len(seconds[name]) // 2]
        print(f"{name:24}{milliseconds:10.0f}{median:8.2f}   {low:.2f}–{high:.2f}        {reference}")


if __name__ == "__main__":
    main()
