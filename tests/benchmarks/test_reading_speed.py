"""How long a pass table takes to read, as ratios to plain readers: prints, asserts no timing."""

import importlib.util
import time

import numpy as np
import pandas as pd
import pytest

from fieldmap.readings import read_table

ROWS = 2_000_000
CHUNK = 100_000


@pytest.fixture(scope="module")
def big_table(tmp_path_factory):
    path = tmp_path_factory.mktemp("reading") / "pass_01.csv"
    rng = np.random.default_rng(7)
    with path.open("w") as file:
        file.write("# two million readings\ntime [s],position [mm],flux [uV s]\n")
        for start in range(0, ROWS, CHUNK):
            steps = np.arange(start, start + CHUNK)
            columns = np.column_stack([steps * 1e-3, steps * 6e-4, rng.normal(size=CHUNK)])
            np.savetxt(file, columns, fmt="%.4f", delimiter=",")
    return path


def best_of(call, rounds=5):
    times = []
    for _ in range(rounds):
        start = time.perf_counter()
        call()
        times.append(time.perf_counter() - start)
    return min(times)


@pytest.mark.benchmark
def test_ratio_to_plain_readers(big_table):
    ours = best_of(lambda: read_table(big_table))
    readers = {"pandas": lambda: pd.read_csv(big_table, skiprows=1)}
    if importlib.util.find_spec("polars"):
        import polars as pl

        readers["polars"] = lambda: pl.read_csv(big_table, skip_rows=1)
    print(f"\n{ROWS} rows: {ours:.3f} s with hash, units and checks")
    for name, call in readers.items():
        print(f"  {ours / best_of(call):.2f} times {name}")
    assert read_table(big_table).time.size == ROWS
