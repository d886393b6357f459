"""Makes `tiles.csv`, `tiles.parquet`, `tiles.feather` and `tiles.jsonl`: one invented table written by
other programs, so that reading is tested against other writers than our own.

    python -m venv venv && venv/bin/pip install pandas pyarrow
    venv/bin/python tables.py

Made with pandas 3.1.1 and pyarrow 26.0.1; never run by the tests.
"""

import pathlib

import pandas
import pyarrow
import pyarrow.feather
import pyarrow.parquet

HERE = pathlib.Path(__file__).parent

table = pandas.DataFrame({
    "tile": ["north, 1", "north, 2", 'the "odd" one', "süd 4"],
    "kiln": pandas.Categorical(["A", "A", "B", "B"]),
    "length": [401.25, None, 399.5, 400.125],
    "fired": [3, 1, 2, 4],
    "sound": [True, False, True, True],
    "day": pandas.to_datetime(["2026-01-31", "2026-02-01", "2026-02-01", "2026-02-03"]),
})
table["day"] = table["day"].dt.date

table.to_csv(HERE / "tiles.csv", index=False, na_rep="NA", lineterminator="\r\n", encoding="utf-8-sig")
arrow = pyarrow.Table.from_pandas(table, preserve_index=False)
pyarrow.parquet.write_table(arrow, HERE / "tiles.parquet", compression="zstd")
pyarrow.feather.write_feather(arrow, str(HERE / "tiles.feather"), compression="lz4")
lines = table.assign(day=table["day"].astype(str)).to_json(orient="records", lines=True, force_ascii=False)
(HERE / "tiles.jsonl").write_text(lines, encoding="utf-8")
