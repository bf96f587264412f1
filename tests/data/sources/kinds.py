"""The same people written as every kind of source, by programs other than ours."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import duckdb
import numpy as np
import pandas as pd
import pyarrow as pa
import pyarrow.feather
import pyreadstat
from data.sources.sas_file import write_sas

COLUMNS = ["night", "site", "glucose", "day"]
FILES = (
    "rows.csv",
    "rows.tsv",
    "rows.csv.gz",
    "rows.TSV.GZ",
    "rows.parquet",
    "parts",
    "parts/*.parquet",
    "rows.arrow",
    "stream.arrow",
    "rows.feather",
    "rows.dta",
    "rows.sav",
    "rows.sas7bdat",
    "rows.xpt",
    "rows.xlsx",
    "rows.duckdb",
)


def people(count: int = 300) -> pd.DataFrame:
    """Rows with missing values in text and numbers, whole numbers, decimals and days."""
    random = np.random.default_rng(5)
    rows = pd.DataFrame(
        {
            "night": random.integers(0, 2, count),
            "site": random.choice(["east", "wést “7”"], count).astype(object),
            "glucose": random.normal(5, 1, count).round(12),  # a workbook is written with 16 digits
            "day": [dt.date(2020, 1, 1) + dt.timedelta(days=int(days)) for days in random.integers(0, 900, count)],
        }
    )
    rows.loc[random.random(count) < 0.1, "site"] = None
    rows.loc[random.random(count) < 0.1, "glucose"] = np.nan
    return rows


def write(rows: pd.DataFrame, place: Path) -> Path:
    """Write the rows as what the name of ``place`` says; a folder or pattern becomes three files."""
    name = place.name.lower()
    codes = rows.assign(site=rows["site"].map({"east": 1, "wést “7”": 2})) if "site" in rows else rows
    labels = {"site": {1: "east", 2: "wést “7”"}}
    if name == "parts" or name == "*.parquet":
        folder = place if name == "parts" else place.parent
        folder.mkdir()
        for number, part in enumerate((rows[:50], rows[50:51], rows[51:])):
            part.to_parquet(folder / f"part-{number}.parquet", index=False)
    elif name.endswith((".csv", ".csv.gz")):
        rows.to_csv(place, index=False)
    elif name.endswith((".tsv", ".tsv.gz")):
        rows.to_csv(place, index=False, sep="\t", compression="gzip" if name.endswith("gz") else None)
    elif name.endswith(".parquet"):
        rows.to_parquet(place, index=False)
    elif name.endswith(".arrow"):
        table = pa.Table.from_pandas(rows, preserve_index=False)
        new = pa.ipc.new_stream if name.startswith("stream") else pa.ipc.new_file
        with new(str(place), table.schema) as sink:
            sink.write_table(table, max_chunksize=40)
    elif name.endswith(".feather"):
        pyarrow.feather.write_feather(pa.Table.from_pandas(rows, preserve_index=False), place)
    elif name.endswith(".dta"):
        pyreadstat.write_dta(codes, place, variable_value_labels=labels)
    elif name.endswith(".sav"):
        pyreadstat.write_sav(codes, place, variable_value_labels=labels)
    elif name.endswith(".sas7bdat"):
        columns = {"night": (None, ""), "site": (20, ""), "glucose": (None, ""), "day": (None, "DATE")}
        chosen = rows[list(columns)]
        write_sas(place, columns, chosen.astype(object).where(chosen.notna(), None).to_numpy().tolist())
    elif name.endswith(".xpt"):
        pyreadstat.write_xport(rows, place)
    elif name.endswith(".xlsx"):
        rows.to_excel(place, index=False)
    else:
        with duckdb.connect(str(place)) as engine:
            engine.register("frame", rows)
            engine.execute("CREATE TABLE people AS SELECT * FROM frame")
    return place
