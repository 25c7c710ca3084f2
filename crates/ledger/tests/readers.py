"""Reads the files of readers.rs with pyarrow, polars and DuckDB; fails where anything differs from what was written."""

import json
import math
import sys

import duckdb
import polars
import pyarrow.dataset
import pyarrow.parquet as parquet

folder, key = sys.argv[1:]


def rows_of(name):
    """The rows as each reader sees them, which must be the same."""
    path = f"{folder}/{name}.parquet"
    arrow = [tuple(row.values()) for row in parquet.read_table(path).to_pylist()]
    assert polars.read_parquet(path).rows() == arrow, f"polars reads {name} differently"
    assert duckdb.sql(f"select * from read_parquet('{path}')").fetchall() == arrow, f"duckdb reads {name} differently"
    return arrow


def check_schema(name, expected):
    file = parquet.ParquetFile(f"{folder}/{name}.parquet")
    schema = file.schema_arrow
    found = [(field.name, str(field.type), field.metadata[b"unit"].decode()) for field in schema]
    assert found == expected, f"{name}: {found}"
    assert all(field.nullable for field in schema)
    assert schema.metadata[b"spinledger.key"].decode() == key
    assert file.metadata.metadata[b"spinledger.key"].decode() == key
    assert json.loads(schema.metadata[b"spinledger.units"]) == {column: unit for column, _, unit in expected}
    assert file.metadata.created_by == "spinledger 1"
    pairs = duckdb.sql(f"select decode(key), decode(value) from parquet_kv_metadata('{folder}/{name}.parquet')").fetchall()
    assert ("spinledger.key", key) in pairs


check_schema(
    "table",
    [("size", "int64", ""), ("temperature", "double", "K"), ("equilibrated", "bool", ""), ("flags", "string", "")],
)
assert rows_of("table") == [
    (8, 2.5, True, ""),
    (-(2**63), math.inf, False, "poor-overlap;é"),
    (None, None, None, None),
]

check_schema("empty", [("value", "double", "J")])
assert rows_of("empty") == []

observed = [
    ("sweep", "int64", "sweeps"),
    ("energy", "double", "meV"),
    ("magnetisation", "double", ""),
    ("correlation_length", "double", ""),
]
block = [(10 * row, row % 8 * -0.25, 1 / (row + 1), float(row) if row % 2 else None) for row in range(1000)]
check_schema("block", observed)
assert rows_of("block") == block

constants = [("temperature", "double", "K"), ("size", "string", ""), ("pinned", "bool", ""), ("chain", "int64", "")]
check_schema("series", constants + observed)
pieces = [(0, 1000), (1, 1000), (0, 300)]
expected = [(2.5, "12x8", True, chain, *row) for chain, rows in pieces for row in block[:rows]]
assert rows_of("series") == expected
assert parquet.ParquetFile(f"{folder}/series.parquet").num_row_groups == 3

# Statistics must not hide rows from a filter, nor show others.
chosen = pyarrow.dataset.dataset(f"{folder}/series.parquet").to_table(filter=pyarrow.dataset.field("chain") == 1)
assert [tuple(row.values()) for row in chosen.to_pylist()] == [row for row in expected if row[3] == 1]
count = duckdb.sql(f"select count(*) from '{folder}/series.parquet' where chain = 0 and energy < -1").fetchall()[0][0]
assert count == sum(row[3] == 0 and row[5] < -1 for row in expected)
lazy = polars.scan_parquet(f"{folder}/series.parquet").filter(polars.col("size") == "12x8", polars.col("sweep") > 5000)
assert lazy.collect().height == sum(row[4] > 5000 for row in expected)
