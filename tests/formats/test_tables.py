"""Tables that people make in a spreadsheet: what is read, and that all else ends in a plain refusal."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, example, given, settings
from hypothesis import strategies as st

from speclib.errors import InputFileError, InvalidValueError
from speclib.formats.tables import MAX_CELL, TableRow, number_in_cell, read_table, whole_number_in_cell

COLUMNS = ("file", "compound", "mz", "note")


def read(folder: Path, data: str | bytes, required: tuple[str, ...] = ("file",)) -> list[TableRow]:
    path = folder / "table.csv"
    path.write_bytes(data if isinstance(data, bytes) else data.encode())
    return read_table(path, COLUMNS, required)


def refusal(folder: Path, data: str | bytes, required: tuple[str, ...] = ("file",)) -> InputFileError:
    with pytest.raises(InputFileError) as caught:
        read(folder, data, required)
    error = caught.value
    assert error.advice
    assert "table.csv" in error.file
    assert str(error).isprintable()
    return error


@pytest.mark.parametrize(
    "text",
    [
        "file,mz\na.txt,43\n",
        "file;mz\na.txt;43",
        "file\tmz\r\na.txt\t43\r\n",
        "file,mz\ra.txt,43\r",
        "\ufefffile,mz\na.txt,43\n",
        " File , MZ \n a.txt , 43 \n",
        "file,mz\n\n,\na.txt,43\n\n",
        '"file","mz"\n"a.txt","43"\n',
        "file,mz,\na.txt,43,\n",
        "file,mz\na.txt,43,,\n",
        "\n\nfile,mz\na.txt,43\n",
    ],
)
def test_separators_line_ends_and_quotes_are_recognised(tmp_path: Path, text: str) -> None:
    (row,) = read(tmp_path, text)
    assert (row["file"], row["mz"], row["note"]) == ("a.txt", "43", "")


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "utf-16", "utf-16-le", "utf-16-be"])
def test_byte_order_marks_are_honoured(tmp_path: Path, encoding: str) -> None:
    marked = "\ufeff" if encoding in ("utf-16-le", "utf-16-be") else ""
    (row,) = read(tmp_path, (marked + "file,note\na.txt,\u00b5g\n").encode(encoding))
    assert row["note"] == "\u00b5g"


def test_quoted_cells_may_hold_separators_line_ends_and_quotes(tmp_path: Path) -> None:
    rows = read(tmp_path, 'file,note\na.txt,"one, ""two""\nthree"\nb.txt,x\n')
    assert rows[0]["note"] == 'one, "two"\nthree'
    assert rows[1] == TableRow(4, {"file": "b.txt", "note": "x"})


def test_a_row_is_named_by_the_line_it_begins_in(tmp_path: Path) -> None:
    rows = read(tmp_path, 'file,note\n"a.txt","two\nlines"\nb.txt,x\n')
    assert [row.line for row in rows] == [2, 4]


def test_the_separator_is_that_of_the_header_and_not_of_quoted_words(tmp_path: Path) -> None:
    (row,) = read(tmp_path, "file;mz;note\na.txt;43,5;a,b,c,d\n")
    assert (row["mz"], row["note"]) == ("43,5", "a,b,c,d")


def test_a_short_row_has_empty_cells(tmp_path: Path) -> None:
    assert read(tmp_path, "file,mz,note\na.txt\n")[0]["note"] == ""


def test_a_table_of_only_a_header_has_no_rows(tmp_path: Path) -> None:
    assert read(tmp_path, "file,mz\n") == []


@pytest.mark.parametrize(
    ("data", "words"),
    [
        ("", "is empty"),
        (" \n\r\n", "is empty"),
        ("\ufeff", "is empty"),
        ("mz\n43\n", "the column 'file' is missing"),
        ("file,mzz\na,1\n", "the column 'mzz' is not known"),
        ("file,mz,mz\na,1,2\n", "the column 'mz' stands twice"),
        ("file,,mz\na,x,1\n", "a cell under a column without a name"),
        ("file,mz\na,1,2\n", "3 cells under 2 columns"),
        ('file,note\na,"open\n', "not a readable CSV"),
        ('file,note\na,"x"y\n', "not a readable CSV"),
        ("file,note\na," + "x" * (MAX_CELL + 1) + "\n", "not a readable CSV"),
        ("file" * 4_000 + "\n", "is not known"),
        ("file," * 30_000 + "\n", "stands twice"),
        (b"file\na\xff\n", "is not UTF-8"),
        (b"file\0\n", "is not text"),
        (b"\xff\xfef\0i\0l\0e\0\n\0a", "is not UTF-16"),
        (b"\xff\xfe\x00\xd8\x00\x00", "is not UTF-16"),
        ("file,note\na,x\x00y\n".encode("utf-16"), "is not text"),
        (b"PK\x03\x04rest", "is not known"),
    ],
)
def test_a_malformed_table_is_refused(tmp_path: Path, data: str | bytes, words: str) -> None:
    assert words in refusal(tmp_path, data).reason


def test_a_near_name_is_suggested(tmp_path: Path) -> None:
    assert refusal(tmp_path, "file,compuond\n").advice == "did you mean 'compound'?"


def test_more_bytes_than_a_table_may_have_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("speclib.formats.tables.MAX_BYTES", 20)
    assert "larger than" in refusal(tmp_path, "file\n" + "a\n" * 20).reason


def test_more_rows_than_a_table_may_have_are_refused(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("speclib.formats.tables.MAX_ROWS", 3)
    assert "more than 3 rows" in refusal(tmp_path, "file\n" + "a\n" * 4).reason


@pytest.mark.parametrize("name", ["missing.csv", "folder", "file.csv/below"])
def test_what_cannot_be_opened_is_refused(tmp_path: Path, name: str) -> None:
    (tmp_path / "folder").mkdir()
    (tmp_path / "file.csv").write_text("file\n")
    with pytest.raises(InputFileError) as caught:
        read_table(tmp_path / name, COLUMNS, ())
    assert caught.value.advice


def test_a_name_with_control_characters_is_shown_escaped(tmp_path: Path) -> None:
    path = tmp_path / "a\x1bb.csv"
    path.write_text("nope\n")
    with pytest.raises(InputFileError) as caught:
        read_table(path, COLUMNS, ())
    assert str(caught.value).isprintable()


def outcome(path: Path, data: bytes) -> list[TableRow]:
    path.write_bytes(data)
    try:
        return read_table(path, COLUMNS, ())
    except InputFileError as error:
        refused = error
    assert refused.advice
    assert str(refused).isprintable()
    return []


@settings(max_examples=300, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.binary(max_size=100) | st.binary(max_size=60).map(lambda tail: b"file,note\n" + tail))
@example(b"\xff\xfe\x00")
@example(b"file,note\n\r\r\n\x1a")
@example(b"file\nx\n\xe2\x80\xa8")
def test_any_bytes_are_read_or_refused(tmp_path: Path, data: bytes) -> None:
    for row in outcome(tmp_path / "any.csv", data):
        assert set(row.cells) <= {*COLUMNS}


@settings(max_examples=200, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(
    st.lists(st.text("ab,;\"'\n\t \u00e9", max_size=8).map(str.strip), min_size=1, max_size=4),
    st.sampled_from([",", ";", "\t"]),
)
def test_quoted_cells_read_back_as_written(tmp_path: Path, cells: list[str], delimiter: str) -> None:
    quoted = delimiter.join('"' + cell.replace('"', '""') + '"' for cell in cells)
    header = delimiter.join(COLUMNS[: len(cells)])
    rows = outcome(tmp_path / "any.csv", f"{header}\n{quoted}\n".encode())
    if any(cells):
        assert [rows[0][name] for name in COLUMNS[: len(cells)]] == cells


@pytest.mark.parametrize(
    ("text", "value"),
    [("", None), ("43", 43.0), ("43.5", 43.5), ("43,5", 43.5), ("-1", -1.0), ("1e3", 1000.0), ("+2", 2.0)],
)
def test_a_number_in_a_cell(text: str, value: float | None) -> None:
    assert number_in_cell(text, "mz") == value


@pytest.mark.parametrize(
    "text",
    ["x", "1_0", "nan", "inf", "-inf", "1e999", "0x10", "\u0661", "1,234.5", "1.234,5", "1,2,3", "9" * 500, "1 2"],
)
def test_what_is_no_number_is_refused_with_what_it_is(text: str) -> None:
    with pytest.raises(InvalidValueError) as caught:
        number_in_cell(text, "the mass")
    assert caught.value.message.startswith("the mass ")
    assert len(caught.value.message) < 200


@pytest.mark.parametrize(("text", "value"), [("", None), ("1", 1), ("12", 12), ("3.0", 3)])
def test_a_whole_number_in_a_cell(text: str, value: int | None) -> None:
    assert whole_number_in_cell(text, "index") == value


@pytest.mark.parametrize("text", ["0", "-1", "1.5", "1e300", "x", "nan"])
def test_what_is_no_whole_number_of_1_or_more_is_refused(text: str) -> None:
    with pytest.raises(InvalidValueError):
        whole_number_in_cell(text, "index")


@settings(max_examples=300)
@given(st.text(max_size=20))
def test_any_cell_is_a_finite_number_or_refused(text: str) -> None:
    for read_cell in (number_in_cell, whole_number_in_cell):
        try:
            value = read_cell(text, "cell")
        except InvalidValueError:
            continue
        assert value is None or abs(value) < float("inf")
