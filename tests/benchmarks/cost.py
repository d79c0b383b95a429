"""What the work costs, beside a yardstick run in the same minute.

Run: python -m tests.benchmarks.cost
"""

from __future__ import annotations

import argparse
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pandas as pd
from scipy.stats.qmc import Sobol

from muntin.bench.plan import propose
from muntin.design.edge import EdgeCriterion, LazyGreedy
from muntin.design.outlook import Outlook
from muntin.record import open_study
from muntin.window.assessment import assess, target_of
from muntin.window.predicted import Predicted

LETTERS = "ABCDEFGHIJKLMNOP"


def write_study(
    folder: Path, kind: str, plates: int, wells: int, factors: int, levels: int, size: int = 96
) -> None:
    """A study of a smooth invented response: `wells` wells a plate on `levels` levels a factor."""
    rng = np.random.default_rng(7)
    target = {"fraction": 0.8, "real": 1.0, "positive": 2.0}[kind]
    names = [f"x{i + 1}" for i in range(factors)]
    tables = "".join(f'[[factors]]\nname = "{n}"\nlow = 0\nhigh = 44\nstep = 1\n' for n in names)
    (folder / "plates").mkdir(parents=True)
    (folder / "study.toml").write_text(
        f'[study]\ntitle = "invented"\nplate = {size}\njudged_by = "well"\n{tables}'
        f'[[responses]]\nname = "signal"\nkind = "{kind}"\nat_least = {target}\n'
    )
    columns = 24 if size == 384 else 12
    places = [f"{LETTERS[i // columns]}{i % columns + 1}" for i in range(size)][:wells]
    pool = rng.integers(0, levels, size=(400, factors)) * (44 // (levels - 1))
    for number in range(1, plates + 1):
        raw = pool[rng.integers(0, len(pool), wells)]
        x = raw / 22.0 - 1.0
        latent = 1.0 + 2.0 * x[:, 0] - 1.5 * x[:, -1] ** 2 + x[:, 0] * x[:, -1]
        mean = {"fraction": 1.0 / (1.0 + np.exp(-latent)), "real": latent}.get(kind, np.exp(latent))
        y = mean * (1.0 + 0.02 * rng.standard_normal()) + 0.03 * rng.standard_normal(wells)
        frame = pd.DataFrame(raw, columns=names).assign(signal=np.round(y, 5))
        frame.insert(0, "well", places)
        frame.to_csv(folder / "plates" / f"plate-{number:02d}.csv", index=False)


def best_of(work: Callable[[], object], times: int = 3) -> float:
    """Shortest of a few runs, s; the first is not counted."""
    work()
    taken = []
    for _ in range(times):
        start = time.perf_counter()
        work()
        taken.append(time.perf_counter() - start)
    return min(taken)


def check_row(root: Path) -> tuple[str, float, float, str]:
    """`muntin check` on ten plates, whole process, against an import of numpy and pandas."""
    folder = root / "ten"
    write_study(folder, "fraction", plates=10, wells=96, factors=2, levels=12)
    command = [str(Path(sys.executable).with_name("muntin")), "check", str(folder)]
    imports = [sys.executable, "-c", "import numpy, pandas"]
    taken = best_of(lambda: subprocess.run(command, check=True, capture_output=True))
    base = best_of(lambda: subprocess.run(imports, check=True, capture_output=True))
    return "muntin check, ten plates, whole process", taken, 2.5, f"{taken / base:.1f} x imports"


def import_row() -> tuple[str, float, float, str]:
    """`import muntin` over numpy and pandas, whole process."""
    both = [sys.executable, "-c", "import numpy, pandas, muntin"]
    imports = [sys.executable, "-c", "import numpy, pandas"]
    taken = best_of(lambda: subprocess.run(both, check=True), 5)
    base = best_of(lambda: subprocess.run(imports, check=True), 5)
    name = "import muntin, over numpy and pandas"
    return name, taken - base, 0.6, f"{taken / base:.2f} x imports"


def assess_row(root: Path, kind: str) -> tuple[str, float, float, str]:
    """96 wells on three plates, two factors; a real one against scikit-learn's point estimate."""
    folder = root / kind
    write_study(folder, kind, plates=3, wells=32, factors=2, levels=12)
    study = open_study(folder)
    taken = best_of(lambda: assess(study))
    name = f"assess, 96 wells on 3 plates, {kind}"
    rival = best_of(lambda: _regressor(study.readings("signal")))
    ratio = f"{taken / rival:.2f} x GaussianProcessRegressor, 5 restarts ({rival:.2f} s)"
    return name, taken, 1.0 if kind == "fraction" else rival, ratio


def _regressor(readings: pd.DataFrame) -> None:
    from sklearn.gaussian_process import GaussianProcessRegressor
    from sklearn.gaussian_process.kernels import ConstantKernel, Matern, WhiteKernel

    kernel = ConstantKernel() * Matern([1.0, 1.0], nu=2.5) + WhiteKernel()
    model = GaussianProcessRegressor(kernel, n_restarts_optimizer=5, random_state=0)
    X = readings[["x1", "x2"]].to_numpy(dtype=float) / 22.0 - 1.0
    y = readings["y"].to_numpy(dtype=float)
    model.fit(X, y - y.mean())


def propose_row(root: Path) -> tuple[str, float, float, str]:
    """24 wells of 2,000 candidates judged at 1,500 points, after 96 wells."""
    study = open_study(root / "fraction")
    view = assess(study)
    fit = best_of(lambda: assess(study), 1)
    taken = best_of(lambda: propose(view, 24))
    name = "propose, 24 of ~2,000 candidates, ~1,500 points"
    return name, taken, 3.0, f"{taken / fit:.1f} x assess"


def choose_many(folder: str) -> None:
    """Print the seconds that 96 wells of 5,000 candidates judged at 3,000 points take; as in a plan
    they are weighed at the points whose verdict is open today.
    """
    view = assess(open_study(Path(folder)))
    definition = view.study.definition
    X, P = (Sobol(3, rng=np.random.default_rng(s)).random_base2(13) for s in (1, 2))
    candidates, judged = 2.0 * X[:5000] - 1.0, 2.0 * P[:3000] - 1.0
    groups = np.zeros(len(candidates), dtype=np.intp)
    start = time.perf_counter()
    whole, target = view.surfaces["signal"], target_of(definition.judged[0])
    p = Predicted.of(whole, judged, target, np.zeros_like(judged)).process_met()
    watched = np.flatnonzero(p * (1.0 - p) > 1e-3)
    outlook = Outlook(whole.lightened(8), judged, candidates, (), (groups,), watched)
    greedy = LazyGreedy(EdgeCriterion((outlook,), (target,)), len(candidates))
    for _ in range(96):
        outlook.pick(greedy.best(np.ones(len(candidates), dtype=bool)))
    print(time.perf_counter() - start)


def many_row(root: Path) -> tuple[str, float, float, str]:
    """A whole plate of three factors, after 96 wells, in its own process."""
    folder = root / "many"
    write_study(folder, "fraction", plates=3, wells=32, factors=3, levels=12)
    code = "import sys; from tests.benchmarks.cost import choose_many; choose_many(sys.argv[1])"
    done = subprocess.run(
        [sys.executable, "-c", code, str(folder)], check=True, capture_output=True, text=True
    )
    peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024**2
    name = "choose 96 of 5,000 candidates, 3,000 points"
    return name, float(done.stdout), 30.0, f"peak {peak:.2f} GiB (budget 1)"


def large_row(root: Path) -> tuple[str, float, float, str]:
    """1,536 wells on four plates, 400 distinct conditions, three factors, in its own process."""
    folder = root / "large"
    write_study(folder, "fraction", plates=4, wells=384, factors=3, levels=12, size=384)
    code = (
        "import sys, time, muntin; study = muntin.open_study(sys.argv[1]); "
        "start = time.perf_counter(); muntin.assess(study); print(time.perf_counter() - start)"
    )
    done = subprocess.run(
        [sys.executable, "-c", code, str(folder)], check=True, capture_output=True, text=True
    )
    peak = resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss / 1024**2
    name = "assess, 1,536 wells, 400 conditions, 3 factors"
    return name, float(done.stdout), 30.0, f"peak {peak:.2f} GiB (budget 2)"


def main() -> int:
    """Print the table; return 1 where a row is over its budget."""
    parser = argparse.ArgumentParser(description=__doc__)
    parser.add_argument("--skip-large", action="store_true")
    given = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        root = Path(name)
        rows = [import_row(), check_row(root), assess_row(root, "fraction")]
        rows += [assess_row(root, "real"), propose_row(root), many_row(root)]
        if not given.skip_large:
            rows.append(large_row(root))
    print(f"{'work':<50}{'seconds':>9}{'budget':>9}  ratio")
    for work, taken, budget, ratio in rows:
        verdict = "" if taken <= budget else "  OVER"
        print(f"{work:<50}{taken:9.2f}{budget:9.2f}  {ratio}{verdict}")
    return int(any(taken > budget for _, taken, budget, _ in rows))


if __name__ == "__main__":
    sys.exit(main())
