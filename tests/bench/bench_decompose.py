"""What a decomposition costs from tallies, beside a row-wise least-squares fit of the same trials.

Run ``python -m tests.bench.bench_decompose`` (or with ``--most 100000`` for a shorter one).
The registry holds the trials of the study; its cost is reading its tallies and taking them
apart. The fit is that of statsmodels' least squares on the rows, already in memory, with
the equal-weight analysis of variance. Answers are asserted equal.
"""

from __future__ import annotations

import argparse
import random
import tempfile
import time
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import numpy as np
import pandas as pd
import statsmodels.api as sm
import statsmodels.formula.api as smf

from registry.analysis.decomposition import decompose
from registry.analysis.results import Decomposition
from registry.services.opening import open_registry
from registry.services.tallied import tallied_study
from registry.services.trial_log import write_trials
from registry.services.upkeep import upgrade
from registry.storage.frame import fetch_frame
from registry.storage.tallies import fetch_tallies
from registry.storage.trials import NewTrial
from registry.storage.units import write_study
from tests.support.studies import MINUTES, NOW, FactorDraft, a_study

Answer = TypeVar("Answer")
FACTORS = (
    FactorDraft("walk", "treatment", ("serpentine", "largest gap", "return")),
    FactorDraft("batch", "treatment", ("4", "8", "12", "16")),
    FactorDraft("start", "treatment", ("front", "back")),
)


def main() -> None:
    """Print one line for each number of trials, and the ratios between them."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--most", type=int, default=1_000_000)
    most: int = parser.parse_args().most
    print("trials      from tallies      row-wise fit        ratio")
    costs = []
    for trials in (1000, most):
        ours, fit = measure(trials)
        costs.append(ours)
        print(f"{trials:>8} {ours * 1000:>13.2f} ms {fit * 1000:>14.1f} ms {fit / ours:>12.0f}")
    print(f"from tallies, {most} trials over 1000: {costs[1] / costs[0]:.2f}")


def measure(trials: int) -> tuple[float, float]:
    """Give the seconds of a decomposition from the registry, and of a fit of the same rows."""
    rng = random.Random(trials)
    with tempfile.TemporaryDirectory() as folder:
        database = open_registry(f"sqlite:///{Path(folder) / 'bench.db'}")
        upgrade(database)
        place = a_study(database, factors=FACTORS, responses=(MINUTES,))
        with write_study(database, place.study_id, person_id=place.keeper.id, now=NOW) as unit:
            frame = fetch_frame(unit.session, place.study_id)
            response = frame.responses[0]
            cells = sorted(frame.ranks)
            made = [(rng.choice(cells), round(200 + rng.gauss(0, 20))) for _ in range(trials)]
            made += [(cell, 200) for cell in cells]
            new = [
                NewTrial(number, cell, ((response.response_id, steps),), NOW)
                for number, (cell, steps) in enumerate(made, start=1)
            ]
            write_trials(unit, frame, new, person_id=place.keeper.id, now=NOW)

        def ours() -> Decomposition:
            with database.read() as session:
                shown = fetch_frame(session, place.study_id)
                tallies = fetch_tallies(session, place.study_id, shown.responses[0].response_id)
            return decompose(tallied_study(shown, shown.responses[0], tallies))

        rows = pd.DataFrame(
            {
                **{factor.name: [frame.levels_of(cell)[factor.name] for cell, _ in made] for factor in FACTORS},
                "minutes": [steps / 10 for _, steps in made],
            }
        )
        seconds, result = quickest(ours, times=7)
        fit_seconds, table = quickest(lambda: fit(rows), times=1)
        sums = [term.equal_weight.ss for term in result.terms]
        np.testing.assert_allclose(sums, table["sum_sq"].to_numpy()[1:-1], rtol=1e-6, atol=1e-6)
        database.dispose()
    return seconds, fit_seconds


def fit(rows: pd.DataFrame) -> pd.DataFrame:
    """Fit the rows by least squares, each factor's levels summing to zero."""
    crossed = "*".join(f"C({factor.name}, Sum)" for factor in FACTORS)
    return sm.stats.anova_lm(smf.ols("minutes ~ " + crossed, rows).fit(), typ=3)


def quickest(task: Callable[[], Answer], *, times: int) -> tuple[float, Answer]:
    """Run a task some times; give the median of its seconds, and its answer."""
    seconds = []
    for _ in range(times):
        start = time.perf_counter()
        answer = task()
        seconds.append(time.perf_counter() - start)
    return sorted(seconds)[len(seconds) // 2], answer


if __name__ == "__main__":
    main()
