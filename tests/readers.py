"""Reads every table of a folder of results with pyarrow, polars and duckdb and compares what they see; checks units and keys."""

import json
import pathlib
import sys

import duckdb
import polars
import pyarrow.dataset
import pyarrow.parquet

folder = pathlib.Path(sys.argv[1])
files = sorted(folder.rglob("*.parquet"))
names = {str(file.relative_to(folder)) for file in files}
for wanted in ["means.parquet", "means.wide.parquet", "means.autocorrelation.parquet", "tc.parquet", "tc.pairs.parquet", "held.parquet"]:
    assert wanted in names, f"{wanted} is missing from {sorted(names)}"
assert sum(name.startswith("chains/") for name in names) == 4, names

units = {}
for file in files:
    arrow = pyarrow.parquet.read_table(file)
    frame = polars.read_parquet(file)
    rows = duckdb.sql(f"select * from read_parquet('{file}')").fetchall()
    assert arrow.column_names == frame.columns, file
    assert arrow.to_pylist() == frame.to_dicts(), file
    assert [tuple(row.values()) for row in arrow.to_pylist()] == rows, file
    assert len(rows) > 0, file
    metadata = pyarrow.parquet.read_schema(file).metadata
    key = metadata[b"spinledger.key"].decode()
    assert len(key) == 64 and int(key, 16) >= 0, file
    for field in arrow.schema:
        assert field.metadata is not None and b"unit" in field.metadata, (file, field.name)
        units[(file.relative_to(folder).parts[0], field.name)] = field.metadata[b"unit"].decode()
    for column in arrow.columns:
        if str(column.type) == "double":
            assert not any(x is not None and x != x for x in column.to_pylist()), f"NaN in {file}"
    counts = {"size_x", "size_y", "sites", "chain", "sweep", "partner", "degrees", "lag"}
    for field in arrow.schema:
        if field.name in counts:
            assert str(field.type) == "int64", (file, field)

assert units[("chains", "temperature")] == "K"
assert units[("chains", "field")] == "meV", units
assert units[("chains", "energy")] == "meV"
assert units[("chains", "sweep")] == "sweeps"
assert units[("means.wide.parquet", "energy")] == "meV"
assert units[("means.wide.parquet", "susceptibility")] == "1/meV"
assert units[("means.wide.parquet", "binder")] == ""
assert units[("tc.pairs.parquet", "temperature")] == "K"

# A sample step's folder is one dataset.
series = pyarrow.dataset.dataset(folder / "chains").to_table()
assert series.num_rows == 4 * 2 * 2 * 500, series.num_rows
assert series.column_names[:3] == ["size", "size_x", "size_y"], series.column_names
assert set(series["size"].to_pylist()) == {"4x6"}
assert set(series["start"].to_pylist()) == {"ordered", "random"}
assert set(series["chain"].to_pylist()) == {0, 1}
assert series["sweep"].to_pylist()[:3] == [20, 21, 22]
assert set(series["sites"].to_pylist()) == {24}

# `record.json` ties the files together: each is named, with its key.
record = json.loads((folder / "record.json").read_text())
assert {entry["file"] for entry in record["files"]} == names
for entry in record["files"]:
    metadata = pyarrow.parquet.read_schema(folder / entry["file"]).metadata
    assert metadata[b"spinledger.key"].decode() == entry["key"], entry
print(f"{len(files)} files read")
