"""What ``weftbook decompose`` costs on a long table, as a whole process, beside pandas and statsmodels.

Run ``python -m tests.bench.bench_command`` (or with ``--rows 100000`` for a shorter one).
Both processes read the same CSV from the disk and print their sums of squares; the answers
are asserted equal.
"""

from __future__ import annotations

import argparse
import json
import random
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from typing import Any

import numpy as np

LEVELS = {
    "walk": ("serpentine", "largest gap", "return"),
    "batch": ("4 orders", "8 orders", "12 orders", "16 orders"),
    "start": ("front", "back"),
}
WEFTBOOK = (sys.executable, "-c", "import sys; from registry.cli import main; sys.exit(main())")
ROW_WISE = """
import json, sys
import pandas as pd, statsmodels.api as sm, statsmodels.formula.api as smf
rows = pd.read_csv(sys.argv[1])
crossed = "*".join(f"C({name}, Sum)" for name in rows.columns[:-1])
table = sm.stats.anova_lm(smf.ols("minutes ~ " + crossed, rows).fit(), typ=3)
print(json.dumps(list(table["sum_sq"])[1:-1]))
"""


def main() -> None:
    """Print the seconds of both processes and how many times longer the row-wise one took."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--rows", type=int, default=1_000_000)
    rows: int = parser.parse_args().rows
    with tempfile.TemporaryDirectory() as folder:
        table = Path(folder) / "tours.csv"
        write_table(table, rows)
        command = [*WEFTBOOK, "decompose", str(table), "--response", "minutes", "--json"]
        ours, answer = timed([*command, *(part for name in LEVELS for part in ("--factor", name))])
        theirs, sums = timed([sys.executable, "-c", ROW_WISE, str(table)])
        np.testing.assert_allclose([term["equal_weight"]["ss"] for term in answer["terms"]], sums, rtol=1e-6, atol=1e-6)
    print(f"{rows} rows: weftbook decompose {ours:.2f} s, pandas and statsmodels {theirs:.2f} s, {theirs / ours:.1f} x")


def write_table(place: Path, rows: int) -> None:
    """Write trials drawn with a fixed seed."""
    rng = random.Random(rows)
    choices = list(LEVELS.values())
    with place.open("w", encoding="utf-8") as file:
        file.write(",".join([*LEVELS, "minutes"]) + "\n")
        for _ in range(rows):
            levels = ",".join(rng.choice(names) for names in choices)
            file.write(f"{levels},{20 + rng.gauss(0, 2):.1f}\n")


def timed(command: list[str]) -> tuple[float, Any]:
    """Run a process; give its seconds and the JSON it printed."""
    start = time.perf_counter()
    printed = subprocess.run(command, check=True, capture_output=True, text=True).stdout
    return time.perf_counter() - start, json.loads(printed)


if __name__ == "__main__":
    main()
