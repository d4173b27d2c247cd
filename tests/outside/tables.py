"""The catalogue as pandas, polars, pyarrow and Python's csv module read it, on the demo run."""

import json

import numpy as np
import pandas
import polars
import pyarrow.parquet
import support

_folder = None


def folder():
    global _folder
    if _folder is None:
        specs = ["vorticity: vorticity > 2.5 rms", "current: current > 2 rms"]
        options = ["--lengths", "2pi", "--viscosity", "0.019", "--resistivity", "0.019"]
        options += ["--tables", "csv,parquet,jsonl", "--companions", "q,helicity"]
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


def text_columns():
    return [c["name"] for c in dictionary() if c["unit"] == "text" or c["name"].startswith("histogram_")]


def check_pandas_reads_the_same_from_all_tables():
    """Parquet and JSON lines against CSV, to the last bit; a CSV cannot tell empty text from a missing value."""
    by_csv = pandas.read_csv(folder() / "catalogue.csv", float_precision="round_trip")
    by_parquet = pandas.read_parquet(folder() / "catalogue.parquet")
    by_json = pandas.read_json(folder() / "catalogue.jsonl", lines=True, precise_float=True)
    for other in (by_parquet, by_json):
        assert list(other.columns) == list(by_csv.columns)
        for name in by_csv.columns:
            if name in text_columns():
                texts = lambda t: [v if isinstance(v, str) else "" for v in t[name]]
                assert texts(other) == texts(by_csv), name
                continue
            if other is by_parquet and not by_csv[name].isna().all():
                assert other[name].dtype == by_csv[name].dtype, f"{name}: {other[name].dtype} and {by_csv[name].dtype}"
            np.testing.assert_array_equal(other[name].to_numpy(float), by_csv[name].to_numpy(float), name)


def check_polars_reads_the_same_from_all_tables():
    """As above; types too, where there is a value to tell one from."""
    by_csv = polars.read_csv(folder() / "catalogue.csv", infer_schema_length=None)
    by_parquet = polars.read_parquet(folder() / "catalogue.parquet")
    by_json = polars.read_ndjson(folder() / "catalogue.jsonl", infer_schema_length=None)
    assert by_parquet.columns == by_csv.columns
    # JSON objects have no order, and polars takes that seriously.
    assert sorted(by_json.columns) == sorted(by_csv.columns)
    for other in (by_parquet, by_json):
        for name in by_csv.columns:
            values, wanted = other[name], by_csv[name]
            if name in text_columns():
                texts = lambda v: list(v.cast(polars.String).fill_null(""))
                assert texts(values) == texts(wanted), name
                continue
            if wanted.null_count() < len(wanted):
                assert values.dtype == wanted.dtype, f"{name}: {values.dtype} and {wanted.dtype}"
            plain = lambda v: v.cast(polars.Float64).fill_null(np.nan).to_numpy()
            np.testing.assert_array_equal(plain(values), plain(wanted), name)


def check_parquet_tells_types_units_and_definitions():
    """pyarrow: types even of columns without a value, no axes as empty text, the dictionary in the metadata."""
    table = pyarrow.parquet.read_table(folder() / "catalogue.parquet")
    assert json.loads(table.schema.metadata[b"ropewalk:columns"]) == dictionary()
    run = json.loads(table.schema.metadata[b"ropewalk:run"])
    told = support.results(folder())
    assert run == {"program": told["program"], "request": told["request"]}
    for column in dictionary():
        kind = str(table.schema.field(column["name"]).type)
        text = column["name"] in text_columns()
        wanted = "string" if text else "int64" if column["unit"] == "count" else "double"
        assert kind == wanted, f"{column['name']}: {kind}"
    assert table["wraps"].null_count == 0 and table["flags"].null_count == 0


def check_companions_have_columns():
    """Mean between smallest and largest value, in every row; units of their own."""
    table = pandas.read_parquet(folder() / "catalogue.parquet")
    units = {c["name"]: c["unit"] for c in dictionary()}
    for name, unit in (("q", "1/T^2"), ("helicity", "L/T^2")):
        assert all(units[f"{name}_{end}"] == unit for end in ("mean", "min", "max"))
        assert (table[f"{name}_min"] <= table[f"{name}_mean"]).all() and (table[f"{name}_mean"] <= table[f"{name}_max"]).all()
