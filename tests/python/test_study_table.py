"""The table of a study as pandas reads it: the CSV and the Parquet file say the same."""

import os
import subprocess
from pathlib import Path

import pandas
import pyarrow.parquet
import pytest

SCENARIO = """
[surface]
shape = "ellipsoid"
semi_axes = ["1 um", "1 um", "1.6 um"]
edge_length = "0.3 um"
[membrane]
bending_rigidity = "20 kBT"
[time]
end = "0.2 ms"
"""
STUDY = """
title = "A table"
scenario = "vesicle.toml"
[[axis]]
key = "membrane.bending_rigidity"
values = ["10 kBT", "20 kBT"]
[[axis]]
key = "surface.edge_length"
values = ["0.3 um", "9 um"]
[[axis]]
key = "surface.bumps"
values = [0.0, 0.02]
[repeats]
seeds = [1, 7]
[[outcome]]
name = "soft, or not"
when = 'time > "0.1 ms"'
"""


@pytest.fixture(scope="module")
def folder(tmp_path_factory):
    binary = os.environ.get("PELLICLE_BINARY", "target/debug/pellicle")
    if not Path(binary).is_file():
        pytest.skip(f"{binary} has not been built (tools/test builds it)")
    place = tmp_path_factory.mktemp("study")
    (place / "vesicle.toml").write_text(SCENARIO)
    (place / "study.toml").write_text(STUDY)
    out = place / "out"
    done = subprocess.run(
        [binary, "scan", str(place / "study.toml"), "--out", str(out), "--quiet"],
        capture_output=True, text=True, timeout=300,
    )
    assert done.returncode == 0, done.stderr
    return out


def test_csv_and_parquet_are_alike(folder):
    csv = pandas.read_csv(folder / "table.csv")
    parquet = pandas.read_parquet(folder / "table.parquet")
    assert list(csv.columns) == list(parquet.columns)
    assert len(csv) == len(parquet) == 16
    for name in csv.columns:
        a, b = csv[name], parquet[name]
        assert (a.isna() == b.isna()).all(), name
        # To the last bit, whatever the types are called.
        assert (a.dropna() == b.dropna()).all(), name


def test_columns_have_types_and_units(folder):
    table = pyarrow.parquet.read_table(folder / "table.parquet")
    kinds = {field.name: str(field.type) for field in table.schema}
    assert kinds["id"] == kinds["outcome"] == kinds["membrane.bending_rigidity"] == "string"
    assert kinds["membrane.bending_rigidity_J"] == kinds["free_energy_J"] == kinds["surface.bumps"] == "double"
    assert kinds["seed"] == kinds["vertex_count"] == "int64"
    frame = table.to_pandas()
    assert frame["membrane.bending_rigidity_J"].iloc[0] == pytest.approx(10 * 1.380649e-23 * 298, rel=1e-14)
    assert (frame["outcome"] == "failed").sum() == 8
    assert frame.loc[frame["outcome"] == "failed", "failure"].str.contains("edge length").all()
    assert frame["id"].is_unique
