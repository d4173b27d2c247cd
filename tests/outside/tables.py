"""The catalogue as pandas, polars and Python's csv module read it, on the demo run."""

import json

import numpy as np
import pandas
import polars
import support

_folder = None


def folder():
    global _folder
    if _folder is None:
        specs = ["vorticity: vorticity > 2.5 rms", "current: current > 2 rms"]
        options = ["--lengths", "2pi", "--viscosity", "0.019", "--resistivity", "0.019"]
        _folder = support.run(support.DEMO / "mhd_0001.h5", *options, *support.families(specs))
    return _folder


def dictionary():
    return json.loads((folder() / "columns.json").read_text())["columns"]


def check_pandas_reads_every_column_with_its_type():
    """Against pandas."""
    table = pandas.read_csv(folder() / "catalogue.csv")
    assert list(table.columns) == [c["name"] for c in dictionary()]
    assert len(table) > 20
    for column in dictionary():
        name, unit, kind = column["name"], column["unit"], table[column["name"]].dtype.kind
        if table[name].isna().all():
            continue
        if unit == "text" or name.startswith("histogram_"):
            assert kind not in "iuf", f"{name}: {table[name].dtype}"
        elif unit == "count" and not table[name].isna().any():
            assert kind in "iu", f"{name}: {table[name].dtype}"
        else:
            assert kind == "f", f"{name}: {table[name].dtype}"


def check_polars_reads_every_column_with_its_type():
    """Against polars."""
    table = polars.read_csv(folder() / "catalogue.csv", infer_schema_length=None)
    assert table.columns == [c["name"] for c in dictionary()]
    for column in dictionary():
        values = table[column["name"]]
        if values.null_count() == len(values):
            continue
        if column["unit"] == "text" or column["name"].startswith("histogram_"):
            assert values.dtype == polars.String, f"{column['name']}: {values.dtype}"
        elif column["unit"] == "count":
            assert values.dtype == polars.Int64, f"{column['name']}: {values.dtype}"
        else:
            assert values.dtype == polars.Float64, f"{column['name']}: {values.dtype}"


def check_all_readers_see_the_same_values():
    """pandas, polars and csv + float of the Python library against each other, to the last bit."""
    path = folder() / "catalogue.csv"
    by_pandas = pandas.read_csv(path, float_precision="round_trip")
    by_polars = polars.read_csv(path, infer_schema_length=None)
    by_csv = support.rows(folder())
    assert len(by_pandas) == len(by_polars) == len(by_csv)
    for column in dictionary():
        name = column["name"]
        if column["unit"] == "text" or name.startswith("histogram_"):
            texts = [r[name] for r in by_csv]
            assert [v or "" for v in by_polars[name].cast(polars.String)] == texts, name
            assert list(by_pandas[name].fillna("").astype(str)) == texts, name
            continue
        plain = np.array([float(r[name]) if r[name] else np.nan for r in by_csv])
        np.testing.assert_array_equal(by_pandas[name].to_numpy(float), plain, name)
        np.testing.assert_array_equal(by_polars[name].cast(polars.Float64).fill_null(np.nan).to_numpy(), plain, name)


def check_histograms_hold_every_cell():
    """numpy reads a histogram back."""
    for row in support.rows(folder()):
        for name in ("histogram_u_vorticity", "histogram_current_b", "histogram_u_b"):
            counts = np.array(row[name].split(), int)
            assert counts.shape == (20,) and counts.sum() == int(row["cells"]), f"{name} of {row['family']} {row['id']}"
