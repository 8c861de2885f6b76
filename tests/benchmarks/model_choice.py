"""How often pooled tests call for a 5PL where a 4PL is fitted: the full table.

Run: python tests/benchmarks/model_choice.py [HISTORIES]   (of 10 runs each, 400 by default)
"""

import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).parents[1]))

from nested_power import CV, power


def main() -> None:
    """Print the table."""
    histories = int(sys.argv[1]) if len(sys.argv) > 1 else 400
    print(f"{histories} histories of 10 runs, 8 levels, noise {100 * CV:.0f} % of the response; shares in %")
    print(
        f"{'asymmetry':>9} {'wells':>5} {'p < .05':>8} {'p < .01':>8} {'called for':>11} {'bias of the 4PL':>16}"
    )
    for asymmetry in (1.0, 0.7, 0.5, 2.0):
        for wells in (2, 3):
            found = power(asymmetry, histories, wells=wells)
            print(
                f"{asymmetry:9g} {wells:5} {100 * found.at_5:8.1f} {100 * found.at_1:8.1f} "
                f"{100 * found.significant:11.1f} {100 * found.worst_bias:16.1f}",
                flush=True,
            )


if __name__ == "__main__":
    main()
