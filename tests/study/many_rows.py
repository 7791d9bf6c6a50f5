"""How much memory and time a study of many rows in a Parquet file takes: python -m tests.study.many_rows 20000000.

Prints one line of JSON: rows, seconds, and MiB of memory beyond what the process had once everything was imported.
The data are invented. Runs in a process of its own, since a peak cannot be reset.
"""

import json
import resource
import sys
import tempfile
import time
from pathlib import Path

import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.parquet as pq

import bayesmed as bm

BATCH = 200_000


def write(path: Path, rows: int) -> None:
    """Write invented rows in batches."""
    random = np.random.default_rng(5)
    writer = None
    for start in range(0, rows, BATCH):
        n = min(BATCH, rows - start)
        frame = pd.DataFrame(
            {"x": random.integers(0, 2, n), "z": random.normal(size=n), "site": random.integers(0, 3, n)}
        )
        frame["site"] = np.array(["a", "b", "c"])[frame["site"]]
        frame["m"] = 0.5 * frame.x + 0.2 * frame.z + random.normal(size=n)
        frame["y"] = 0.4 * frame.m + 0.1 * frame.m * frame.z + random.normal(size=n)
        table = pa.Table.from_pandas(frame, preserve_index=False)
        writer = writer or pq.ParquetWriter(path, table.schema)
        writer.write_table(table)
    if writer is not None:
        writer.close()


def peak() -> float:
    """Return the largest resident memory of this process so far, in MiB."""
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def run(path: Path) -> None:
    """Observe, fit and ask for effects."""
    formulas = {"mediator": "m ~ x * z + site", "outcome": "y ~ m * z + x * z + site"}
    study = bm.Study(path, exposure="x", **formulas)
    fit = study.fit(method="exact", draws=500, random_seed=1, progressbar=False)
    fit.effects(at={"z": [-1.0, 0.0, 1.0]}, rho=0.0)


def main() -> None:
    """Write a file, run once on a few rows so that everything is imported, then on all of them."""
    rows = int(sys.argv[1]) if len(sys.argv) > 1 else 2_000_000
    with tempfile.TemporaryDirectory(dir=sys.argv[2] if len(sys.argv) > 2 else None) as folder:
        few, many = Path(folder, "few.parquet"), Path(folder, "many.parquet")
        write(few, 1000)
        write(many, rows)
        run(few)
        before, start = peak(), time.perf_counter()
        run(many)
        print(
            json.dumps({"rows": rows, "seconds": time.perf_counter() - start, "mib": peak() - before, "base": before})
        )


if __name__ == "__main__":
    main()
