"""How long a logistic regression takes, and how much memory: covariate patterns against rows.

Both sides read the same Parquet file and estimate the same odds ratio, adjusted for four categorical
covariates: we through ``adjustplan.estimate.fit``, the rival through the formula interface of statsmodels on
rows read by pandas. Each runs in a process of its own; the clock starts after the imports, and the imports
are timed apart. Each fit is repeated in its process, and the first run counts. The two estimates and standard
errors must agree to 1e-8.

    python tests/benchmarks/fit_patterns.py                 # 10^5, 10^6 and 10^7 rows
    python tests/benchmarks/fit_patterns.py --rows 1000000 --rival-limit 1000000

Above ``--rival-limit`` rows the rival is left out, because its model matrix alone would not fit into most
memories.
"""

from __future__ import annotations

import argparse
import json
import subprocess
import sys
import tempfile
from pathlib import Path

import numpy as np

EDGES = """age_band, site, sex, shift_type -> night_work
age_band, site, sex, shift_type -> diabetes
night_work -> diabetes
"""
PLAN = """title = "Night work and diabetes, generated"
graph = "night_work.edges"
[question]
exposure = "night_work"
outcome = "diabetes"
[study]
design = "cohort"
[adjustment]
set = ["age_band", "site", "sex", "shift_type"]
[analysis]
measure = "odds ratio"
data = "rows.parquet"
forms = { age_band = "category", site = "category", sex = "category", shift_type = "category" }
"""
OURS = """
import json, resource, sys, time
begun = time.perf_counter()
import duckdb, formulaic, ibis, ibis.backends.duckdb, pandas, pyarrow, scipy.linalg, scipy.optimize
import statsmodels.genmod.generalized_linear_model
from adjustplan.estimate import fit
from adjustplan.plan import read_plan
imported = time.perf_counter()
plan = read_plan(sys.argv[1] + "/plan.toml")
start = time.perf_counter()
result = fit(plan).adjusted[0]
end = time.perf_counter()
again = time.perf_counter()
fit(plan)
print(json.dumps({
    "imports": imported - begun, "seconds": end - start, "again": time.perf_counter() - again,
    "memory": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024,
    "estimate": result.estimate, "standard_error": result.standard_error,
}))
"""
RIVAL = """
import json, math, resource, sys, time
begun = time.perf_counter()
import pandas, pyarrow.parquet
import statsmodels.formula.api as smf
imported = time.perf_counter()
start = time.perf_counter()
rows = pandas.read_parquet(sys.argv[1] + "/rows.parquet")
formula = "diabetes ~ night_work + C(age_band) + C(site) + C(sex) + C(shift_type)"
result = smf.logit(formula, rows).fit(disp=0)
end = time.perf_counter()
print(json.dumps({
    "imports": imported - begun, "seconds": end - start,
    "memory": resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024,
    "estimate": math.exp(result.params["night_work"]), "standard_error": float(result.bse["night_work"]),
}))
"""


def write_rows(path: Path, rows: int, seed: int = 20210101, chunk: int = 1_000_000) -> None:
    """Write generated people to Parquet, chunk by chunk."""
    import pyarrow as pa
    import pyarrow.parquet as pq

    random = np.random.default_rng(seed)
    writer = None
    for start in range(0, rows, chunk):
        n = min(chunk, rows - start)
        age, site = random.integers(0, 8, n), random.integers(0, 10, n)
        sex, shift = random.integers(0, 2, n), random.integers(0, 4, n)
        night = random.random(n) < 1 / (1 + np.exp(1.5 - 0.1 * age - 0.05 * site - 0.3 * shift))
        risk = 1 / (1 + np.exp(3 - 0.25 * age - 0.1 * site - 0.2 * sex - 0.4 * night))
        table = pa.table(
            {
                "age_band": age,
                "site": site,
                "sex": sex,
                "shift_type": shift,
                "night_work": night.astype(np.int64),
                "diabetes": (random.random(n) < risk).astype(np.int64),
            }
        )
        writer = writer or pq.ParquetWriter(path, table.schema)
        writer.write_table(table)
    if writer:
        writer.close()


def run(script: str, folder: Path) -> dict[str, float]:
    """Run one side in a process of its own."""
    done = subprocess.run(
        [sys.executable, "-W", "ignore", "-c", script, str(folder)],
        capture_output=True,
        text=True,
        check=False,
    )
    if done.returncode:
        sys.exit(f"a side failed with code {done.returncode}:\n{done.stderr}")
    result: dict[str, float] = json.loads(done.stdout)
    return result


def told(name: str, result: dict[str, float]) -> str:
    """One line about one side."""
    again = f", again {result['again']:.3f} s" if "again" in result else ""
    return (
        f"  {name:<12} {result['seconds']:9.3f} s{again}, imports {result['imports']:.2f} s, "
        f"peak memory {result['memory']:.0f} MiB"
    )


def main() -> None:
    """Measure, print, and fail when the two sides disagree."""
    parser = argparse.ArgumentParser(description="covariate patterns against rows")
    parser.add_argument("--rows", type=int, nargs="*", default=[10**5, 10**6, 10**7])
    parser.add_argument("--rival-limit", type=int, default=10**7, help="leave the rival out above so many rows")
    options = parser.parse_args()
    for rows in options.rows:
        with tempfile.TemporaryDirectory() as name:
            folder = Path(name)
            (folder / "night_work.edges").write_text(EDGES, encoding="utf-8")
            (folder / "plan.toml").write_text(PLAN, encoding="utf-8")
            write_rows(folder / "rows.parquet", rows)
            ours = run(OURS, folder)
            print(f"{rows} rows\n{told('adjustplan', ours)}", flush=True)
            if rows > options.rival_limit:
                print(f"  statsmodels  left out above {options.rival_limit} rows: too much memory")
                continue
            rival = run(RIVAL, folder)
        print(told("statsmodels", rival))
        whole = [side["seconds"] + side["imports"] for side in (rival, ours)]
        print(
            f"  ratio        {rival['seconds'] / ours['seconds']:.0f} times in time, "
            f"{whole[0] / whole[1]:.1f} times with imports, "
            f"{rival['memory'] / ours['memory']:.1f} times in memory",
            flush=True,
        )
        for key in ("estimate", "standard_error"):
            apart = abs(ours[key] / rival[key] - 1)
            print(f"  {key:<14} apart by {apart:.1e}")
            if not apart < 1e-8:
                sys.exit(f"{key}: {ours[key]!r} against {rival[key]!r}")


if __name__ == "__main__":
    main()
