"""Reading, picking, sampling and writing layers (performance rows 7 to 12 and 15).

Each row runs in a process of its own, `tests/with_qgis/reading_rounds.py`, which first
checks that product and baseline give the same answer and then times them in turn. A
plain test run makes one round of little data.
"""

import json
import statistics
import subprocess
import sys
from pathlib import Path

import pytest
from benchmarks.ratio import SLACK

WORKER = Path(__file__).resolve().parents[1] / "with_qgis" / "reading_rounds.py"
#: Row of the table (and what of it), target, rounds.
ROWS = [
    ("7 lines", 2.3, 15),
    ("7 points", 2.0, 9),
    ("8", 0.15, 9),
    ("9", 0.25, 5),
    ("10 lines", 0.2, 9),
    ("10 points", 0.2, 9),
    ("11", 0.4, 9),
    ("12", 0.6, 9),
    ("15", 1.3, 9),
]


def rounds_of(row, rounds, size):
    """Seconds of each round of product and baseline."""
    done = subprocess.run(
        [sys.executable, str(WORKER), row, str(rounds), size],
        capture_output=True,
        text=True,
        check=False,
    )
    assert done.returncode == 0, done.stdout + done.stderr
    return json.loads(done.stdout.strip().splitlines()[-1])


@pytest.mark.parametrize(("row", "target", "rounds"), ROWS, ids=[r[0] for r in ROWS])
def test_layers_are_read_and_written_near_the_limit(benchmark, row, target, rounds):
    """The ratio to QGIS's own way stays within its target."""
    full = not benchmark.disabled
    args = (row, rounds if full else 1, "full" if full else "small")
    seconds = benchmark.pedantic(rounds_of, args=args, rounds=1)
    ratio = statistics.median(seconds["product"]) / statistics.median(
        seconds["baseline"]
    )
    benchmark.extra_info.update(row=row, target=target, ratio=round(ratio, 4))
    if full:
        assert ratio <= SLACK * target, f"row {row}: {ratio:.3f}, target {target:g}"
