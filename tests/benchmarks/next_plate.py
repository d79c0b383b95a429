"""All tables on the choice of plates, one after the other: plate series of two and of three
factors, the seconds that a choice takes, forecasts against what then happened, and the search for
the best.

Run: python -m tests.benchmarks.next_plate                    # as in the README
     python -m tests.benchmarks.next_plate --processes 2 --seeds 3       # a look
"""

from __future__ import annotations

import argparse
import subprocess
import sys


def main() -> int:
    """Print the tables; return 1 where one is over its budget."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--processes", type=int, default=20, help="drawn processes of each kind")
    parser.add_argument("--seeds", type=int, default=30, help="of the search for the best")
    given = parser.parse_args()
    drawn = ["--processes", str(given.processes)]
    studies = (
        ["series", *drawn],
        ["series", "--factors", "3", *drawn],
        ["cost", "--skip-large"],
        ["forecast", *drawn],
        ["best", "--seeds", str(given.seeds)],
    )
    codes = []
    for name, *arguments in studies:
        print(f"\n{name} {' '.join(arguments)}\n", flush=True)
        command = [sys.executable, "-m", f"tests.benchmarks.{name}", *arguments]
        codes.append(subprocess.run(command, check=False).returncode)
    return max(codes)


if __name__ == "__main__":
    sys.exit(main())
