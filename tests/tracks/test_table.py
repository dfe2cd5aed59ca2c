"""The table of regions, read by pandas with types given and by the reader of the package."""

from pathlib import Path

import numpy as np
import pandas as pd
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from hmmseg.errors import OutputError
from hmmseg.tracks.table import COLUMNS, fixed, read_regions_table, write_regions_table
from tests.tracks.regions import Row, table_of, tables

ROW: Row = ("a_1", "NA", 0, 10, "a", 0.98765, 12.3456)


def test_the_bytes(tmp_path: Path) -> None:
    rows: list[Row] = [ROW, ("a_2", "c.1", 5, 6, "a", 1.0, -0.0001)]
    write_regions_table(tmp_path / "x.tsv", table_of(rows))
    assert (tmp_path / "x.tsv").read_bytes() == (
        b"region_id\trecord\tstart\tend\tlength\tstate\tmean_posterior\tlog_odds_bits\n"
        b"a_1\tNA\t0\t10\t10\ta\t0.9877\t12.346\n"
        b"a_2\tc.1\t5\t6\t1\ta\t1.0000\t0.000\n"
    )


@given(table=tables())
@settings(max_examples=40)
def test_what_is_written_is_read_back(
    table: pd.DataFrame, tmp_path_factory: pytest.TempPathFactory
) -> None:
    path = tmp_path_factory.mktemp("table") / "x.tsv"
    write_regions_table(path, table)
    found = read_regions_table(path)
    assert tuple(found.columns) == COLUMNS
    for name in COLUMNS[:6]:
        assert found[name].tolist() == table[name].tolist()
    np.testing.assert_allclose(found["mean_posterior"], table["mean_posterior"], 0, 0.0000501)
    np.testing.assert_allclose(found["log_odds_bits"], table["log_odds_bits"], 0, 0.000501)
    types = dict.fromkeys(("region_id", "record", "state"), str)
    other = pd.read_csv(path, sep="\t", dtype=types, keep_default_na=False, encoding="utf-8")
    assert other.equals(found.astype(other.dtypes))


def test_further_columns(tmp_path: Path) -> None:
    table = table_of([ROW, ("a_2", "c.1", 5, 6, "a", 1.0, np.inf)])
    table["q_value"] = [1 / 3, np.nan]
    table["gc"] = [1 / 3, 0.5]
    table["genes"] = [7, 0]
    table["note"] = ["x y", None]
    table = table[[*table.columns[::-1]]]
    write_regions_table(tmp_path / "x.tsv", table, {"gc": 2})
    lines = (tmp_path / "x.tsv").read_text(encoding="utf-8").splitlines()
    assert [line.split("\t")[8:] for line in lines] == [
        ["note", "genes", "gc", "q_value"],
        ["x y", "7", "0.33", "0.333333"],
        ["NA", "0", "0.50", "NA"],
    ]
    found = read_regions_table(tmp_path / "x.tsv")
    assert found["record"].tolist() == ["NA", "c.1"]
    assert found["note"].tolist() == ["x y", "NA"]
    assert found["genes"].tolist() == [7, 0]
    assert np.isnan(found["q_value"][1])
    assert found["log_odds_bits"].tolist() == [12.346, np.inf]


def test_many_rows_are_written_some_at_a_time(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    many = table_of([(f"a_{i}", "c.1", i, i + 5, "a", 0.5, float(i)) for i in range(23)])
    write_regions_table(tmp_path / "one.tsv", many)
    monkeypatch.setattr("hmmseg.tracks.table._ROWS_AT_ONCE", 5)
    write_regions_table(tmp_path / "other.tsv", many)
    assert (tmp_path / "one.tsv").read_bytes() == (tmp_path / "other.tsv").read_bytes()


def test_no_regions(tmp_path: Path) -> None:
    write_regions_table(tmp_path / "x.tsv", table_of([]))
    found = read_regions_table(tmp_path / "x.tsv")
    assert tuple(found.columns) == COLUMNS
    assert found.empty
    assert found["start"].dtype == np.int64
    assert found["mean_posterior"].dtype == np.float64


@pytest.mark.parametrize("bad", ["a\tb", "a\nb", "a\rb", "a\x0bb"])
def test_refuses_text_that_breaks_the_table(tmp_path: Path, bad: str) -> None:
    table = table_of([ROW, (bad, "c.1", 5, 6, "a", 1.0, 0.0)])
    with pytest.raises(OutputError, match=r"x\.tsv:3: a text holds a tab or line end"):
        write_regions_table(tmp_path / "x.tsv", table)


def test_refuses_a_table_without_a_column(tmp_path: Path) -> None:
    with pytest.raises(OutputError, match="lacks end, state"):
        write_regions_table(tmp_path / "x.tsv", table_of([ROW]).drop(columns=["end", "state"]))


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("region_id", "id", r"x\.tsv:1: the header does not begin"),
        ("\t10\t10", "\t10.5\t10", r"x\.tsv:2: end is '10\.5', not a number"),
        ("\t10\t10", "\t\t10", r"x\.tsv:2: end is '', not a number"),
        ("0.9877", "high", r"x\.tsv:2: mean_posterior is 'high', not a number"),
        ("\t12.346", "", r"x\.tsv:2: 7 columns, the header 8"),
        ("\t12.346", "\t1\t2", r"x\.tsv:2: 9 columns, the header 8"),
    ],
)
def test_reading_names_the_line(tmp_path: Path, old: str, new: str, message: str) -> None:
    write_regions_table(tmp_path / "x.tsv", table_of([ROW]))
    text = (tmp_path / "x.tsv").read_text(encoding="utf-8")
    assert old in text
    (tmp_path / "x.tsv").write_text(text.replace(old, new), encoding="utf-8")
    with pytest.raises(OutputError, match=message):
        read_regions_table(tmp_path / "x.tsv")


def test_reading_an_empty_file(tmp_path: Path) -> None:
    (tmp_path / "x.tsv").touch()
    with pytest.raises(OutputError, match="the header does not begin"):
        read_regions_table(tmp_path / "x.tsv")


@given(st.floats(-1e6, 1e6), st.integers(1, 6))
def test_fixed_has_no_negative_zero(value: float, decimals: int) -> None:
    text = fixed(value, decimals)
    assert float(text) == float(f"{value:.{decimals}f}")
    assert not (float(text) == 0 and text.startswith("-"))
    assert len(text.partition(".")[2]) == decimals
