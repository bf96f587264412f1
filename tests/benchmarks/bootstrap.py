"""How long 1,000 bootstrap replicates take: counts of covariate patterns against rows.

Both sides read the same Parquet file and bootstrap the same risk difference, standardised over four covariates by a
logistic regression: we through the reduction to atoms and ``adjustplan.estimate.bootstrap``, the rival by drawing rows
with numpy and fitting them with statsmodels. The rival gets its quickest fair form: arrays in place of a formula, a
model matrix that is made once and not in every replicate, the fit of the sample as a start, no covariance, and
``Logit`` or ``GLM``, whichever is faster. It is timed over a few replicates, and its time for all of them is
extrapolated from their mean; the clock of both sides starts after the imports. The two estimates must agree to 1e-8,
and the two standard errors within their Monte-Carlo error.

    python tests/benchmarks/bootstrap.py                       # 10^6 rows, 1,000 replicates
    python tests/benchmarks/bootstrap.py --continuous          # age as a number: nearly every row its own pattern
"""

from __future__ import annotations

import argparse
import json
import math
import os
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

COMMON = """
import json, resource, sys, time
from pathlib import Path
import numpy as np
folder, replicates, continuous = Path(sys.argv[1]), int(sys.argv[2]), sys.argv[3] == "True"
names = ["age", "site", "sex", "shift_type"]
def told(**numbers):
    print(json.dumps({**numbers, "memory": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024}))
"""
OURS = """
import duckdb, ibis, ibis.backends.duckdb, pandas, pyarrow, scipy.special
from adjustplan.data import Wanted, open_data, reduce_to_patterns
from adjustplan.estimate.bootstrap import Job, percentile_interval, resample
from adjustplan.estimate.exposure import ExposureCoding
from adjustplan.estimate.modelling import pose
from adjustplan.estimate.problem import Setting
from adjustplan.estimate.threads import one_thread
from adjustplan.estimate.ways import solve
start = time.perf_counter()
variables = ["night_work", *names]
with open_data(folder / "rows.parquet") as source:
    atoms = reduce_to_patterns(source, Wanted("diabetes", {name: name for name in variables}, atoms=True))
reduced = time.perf_counter()
forms = {name: "linear" if continuous and name == "age" else "category" for name in names}
coding = ExposureCoding("category", 1.0, 0.0, ("yes", "no"))
setting = Setting("night_work", "risk difference", "logistic", "standardisation", "robust", coding, forms)
with one_thread():
    problem, _ = pose(atoms.complete(variables), setting, names)
    estimate = solve(problem).value
jobs = [Job(problem, atoms.place(variables))]
found = resample(atoms, jobs, replicates, 20210101)
interval = percentile_interval(found.values[:, 0])
end = time.perf_counter()
told(seconds=end - start, reduction=reduced - start, estimate=estimate, standard_error=interval.standard_error,
     patterns=len(problem.moments), atoms=len(atoms))
"""
RIVAL = """
import pandas, pyarrow.parquet
import statsmodels.api as sm
start = time.perf_counter()
rows = pandas.read_parquet(folder / "rows.parquet")
columns = [np.ones(len(rows)), rows["night_work"].to_numpy(float)]
for name in names:
    values = rows[name].to_numpy()
    if continuous and name == "age":
        columns.append((values - 45.0) / 15.0)
    else:
        columns += [(values == level).astype(float) for level in np.unique(values)[1:]]
X, y = np.column_stack(columns), rows["diabetes"].to_numpy(float)

def by_logit(y, X, begin):
    return sm.Logit(y, X).fit(disp=0, start_params=begin, method="newton", skip_hessian=True).params

def by_glm(y, X, begin):
    return sm.GLM(y, X, sm.families.Binomial()).fit(start_params=begin).params

def standardised(y, X, fit, begin=None):
    coefficients = fit(y, X, begin)
    means = []
    for level in (1.0, 0.0):
        X[:, 1] = level
        means.append(float((1 / (1 + np.exp(-(X @ coefficients)))).mean()))
    return means[0] - means[1], coefficients

exposure = X[:, 1].copy()
estimate, begin = standardised(y, X, by_logit)
X[:, 1] = exposure
prepared = time.perf_counter()
random = np.random.default_rng(20210101)
best, values = float("inf"), []
for fit in (by_logit, by_glm):
    begun = time.perf_counter()
    for _ in range(replicates):
        chosen = random.integers(0, len(y), len(y))
        values.append(standardised(y[chosen], X[chosen], fit, begin)[0])
    best = min(best, (time.perf_counter() - begun) / replicates)
told(before=prepared - start, each=best, estimate=estimate, standard_error=float(np.std(values, ddof=1)),
     replicates=len(values))
"""


def write_rows(path: Path, rows: int, *, continuous: bool, seed: int = 20210101) -> None:
    """Write generated people to Parquet."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    random = np.random.default_rng(seed)
    age = random.uniform(30, 60, rows) if continuous else random.integers(0, 5, rows)
    older = (age - 45) / 15 if continuous else age / 2 - 1
    site, sex, shift = random.integers(0, 4, rows), random.integers(0, 2, rows), random.integers(0, 3, rows)
    night = random.random(rows) < 1 / (1 + np.exp(1.2 - 0.3 * older - 0.1 * site - 0.3 * shift))
    risk = 1 / (1 + np.exp(2.5 - 0.5 * older - 0.2 * site - 0.2 * sex - 0.4 * night))
    columns = {"age": age, "site": site, "sex": sex, "shift_type": shift, "night_work": night.astype(np.int64)}
    pq.write_table(pa.table({**columns, "diabetes": (random.random(rows) < risk).astype(np.int64)}), path)


def run(script: str, folder: Path, replicates: int, *, continuous: bool) -> dict[str, float]:
    """Run one side in a process of its own."""
    command = [sys.executable, "-W", "ignore", "-c", COMMON + script, str(folder), str(replicates), str(continuous)]
    done = subprocess.run(command, capture_output=True, text=True, check=False)
    if done.returncode:
        sys.exit(f"a side failed with code {done.returncode}:\n{done.stderr}")
    result: dict[str, float] = json.loads(done.stdout)
    return result


def main() -> None:
    """Measure, print, and fail when the two sides disagree."""
    parser = argparse.ArgumentParser(description="bootstrap of pattern counts against rows")
    parser.add_argument("--rows", type=int, default=10**6)
    parser.add_argument("--replicates", type=int, default=1000)
    parser.add_argument("--rival-replicates", type=int, default=5, help="how many the rival is timed over")
    parser.add_argument("--continuous", action="store_true", help="age is a number without groups")
    options = parser.parse_args()
    with tempfile.TemporaryDirectory() as name:
        folder = Path(name)
        write_rows(folder / "rows.parquet", options.rows, continuous=options.continuous)
        ours = run(OURS, folder, options.replicates, continuous=options.continuous)
        rival = run(RIVAL, folder, options.rival_replicates, continuous=options.continuous)
    whole = rival["before"] + options.replicates * rival["each"]
    print(f"{options.rows} rows, {options.replicates} replicates, {os.cpu_count()} processors")
    print(
        f"  adjustplan   {ours['seconds']:9.2f} s, of which {ours['reduction']:.2f} s to reduce the rows to"
        f" {ours['atoms']:.0f} atoms in {ours['patterns']:.0f} patterns; peak memory {ours['memory']:.0f} MiB"
    )
    print(
        f"  statsmodels  {whole:9.0f} s, extrapolated from {rival['each']:.2f} s for each of"
        f" {options.rival_replicates} replicates; peak memory {rival['memory']:.0f} MiB"
    )
    print(f"  ratio        {whole / ours['seconds']:.0f} times in time")
    apart = abs(ours["estimate"] / rival["estimate"] - 1)
    print(f"  estimate {ours['estimate']:.6f}, apart by {apart:.1e}")
    print(f"  standard errors {ours['standard_error']:.2e} and {rival['standard_error']:.2e}")
    if not apart < 1e-8:
        sys.exit("the estimates disagree")
    error = math.sqrt(0.5 / options.replicates + 0.5 / (rival["replicates"] - 1))
    if not abs(math.log(ours["standard_error"] / rival["standard_error"])) < 4 * error:
        sys.exit("the standard errors disagree")


if __name__ == "__main__":
    main()
