"""Reads the exported arrays of a results folder and compares them with its tables, bit by bit."""

import csv
import pathlib
import sys

import numpy as np

folder = pathlib.Path(sys.argv[1])
archives = sorted((folder / "export").glob("*.npz"))
assert archives, "nothing was exported"
for archive in archives:
    arrays = np.load(archive)
    with open(folder / "branches" / f"{archive.stem}.csv", newline="") as file:
        rows = list(csv.DictReader(file))
    for name in ("value", "period"):
        table = np.array([float(row[name]) for row in rows])
        assert np.array_equal(arrays[f"point_{name}"], table), f"{archive.name}: {name} differs from the table"
    print(f"passed  {archive.name}: {len(rows)} points, arrays {', '.join(sorted(arrays.files))}")
