"""Data files become tables: what counts as a number, what is missing, and what is refused."""

import datetime
import warnings

import numpy
import pandas
import pyreadstat
import pytest
from test_house import programs_named

from reviewkit.readers.tables import ColumnKind, Table, describe_columns, read_table, trace_transform
from reviewkit.refusals import Refusal


def written(folder, name: str, content: str | bytes):
    path = folder / name
    path.write_bytes(content if isinstance(content, bytes) else content.encode("utf-8"))
    return path


def test_columns_keep_their_order_and_kinds(tmp_path) -> None:
    path = written(tmp_path, "kilns.csv", "kiln,fired,bricks,opened\nA,1,20.5,2019-04-01\nB,0,,2019-05-01\n")
    table = read_table(path)
    assert list(table.frame.columns) == ["kiln", "fired", "bricks", "opened"]
    assert table.frame["bricks"].isna().tolist() == [False, True]
    assert table.frame["opened"].tolist() == ["2019-04-01", "2019-05-01"], "dates stay text"
    assert len(table.sha256) == 64


@pytest.mark.parametrize("separator", [",", ";", "\t", "|"])
def test_each_separator_is_recognised(tmp_path, separator: str) -> None:
    rows = [["name", "x", "y"], ["a;b" if separator != ";" else "a,b", "1", "2"], ["c", "3", "4"]]
    path = written(tmp_path, "t.csv", "\n".join(separator.join(row) for row in rows))
    assert read_table(path).frame["y"].tolist() == [2, 4]


@pytest.mark.parametrize("encoding", ["utf-8", "utf-8-sig", "cp1252", "latin-1"])
def test_each_encoding_is_read(tmp_path, encoding: str) -> None:
    path = written(tmp_path, "t.csv", "größe,ort\n1,Münz\n".encode(encoding))
    table = read_table(path)
    assert list(table.frame.columns) == ["größe", "ort"]
    assert table.frame["ort"].tolist() == ["Münz"]


def test_decimal_commas_are_numbers(tmp_path) -> None:
    path = written(tmp_path, "t.csv", "a;b;c\n1,5;1.234,75;x\n0,25;12,5;y\n")
    table = read_table(path)
    assert table.frame["a"].tolist() == [1.5, 0.25]
    assert table.frame["b"].tolist() == [1234.75, 12.5]
    assert any("Decimal commas" in remark for remark in table.remarks)


def test_thousands_are_numbers_where_they_can_be_nothing_else(tmp_path) -> None:
    path = written(tmp_path, "t.csv", 'a,b\n"1,234,567","2,345"\n"12,000","1,000"\n')
    assert read_table(path).frame["b"].tolist() == [2345, 1000]


def test_an_open_comma_stays_text_and_is_said(tmp_path) -> None:
    table = read_table(written(tmp_path, "t.csv", 'a,b\n"1,234",1\n"2,345",2\n'))
    assert table.frame["a"].tolist() == ["1,234", "2,345"]
    assert any("thousands or decimals" in remark for remark in table.remarks)


def test_missing_codes_are_missing_among_numbers(tmp_path) -> None:
    table = read_table(written(tmp_path, "t.csv", "a,b\n1,x\n.,NA\n.a,None\nNULL,\n2,y\n"))
    assert table.frame["a"].isna().tolist() == [False, True, True, True, False]
    assert table.frame["b"].dropna().tolist() == ["x", "None", "y"], "a class may be called None"


def test_true_and_false_are_one_and_zero(tmp_path) -> None:
    table = read_table(written(tmp_path, "t.csv", "a,b\nTRUE,1\nFALSE,2\nNA,3\n"))
    assert table.frame["a"].tolist()[:2] == [1.0, 0.0]
    assert numpy.isnan(table.frame["a"][2])


def test_quoted_fields_hold_separators_quotes_and_line_ends(tmp_path) -> None:
    table = read_table(written(tmp_path, "t.csv", 'a,b\n"x, ""y""\nz",1\n'))
    assert table.frame["a"].tolist() == ['x, "y"\nz']


def test_names_given_twice_or_not_at_all_are_changed_and_said(tmp_path) -> None:
    table = read_table(written(tmp_path, "t.csv", ",x,x,x_2\n1,2,3,4\n"))
    assert list(table.frame.columns) == ["column 1", "x", "x_3", "x_2"]
    assert len(table.remarks) == 2


@pytest.mark.parametrize(
    ("name", "content", "said"),
    [
        ("t.csv", b"", "empty"),
        ("t.csv", b"  \n ", "empty"),
        ("t.csv", b"a,b\n", "no rows"),
        ("t.csv", b"1,2\n3,4\n", "numbers, not names"),
        ("t.csv", b"a,b\n1,2,3\n4,5,6\n", "more fields"),
        ("t.csv", b"a,b\n1,2\n1,2,3\n", "line 3 has 3 fields"),
        ("t.csv", b'a,b\n1,"2\n3,4\n', "quoted field is not closed"),
        ("t.csv", b"a,b\n1,\x002\n", "NUL"),
        ("t.csv", b"PK\x03\x04rest", "zip archive"),
        ("t.csv", b"\x80\x04\x95" + bytes(range(1, 32)) * 9, "not plain text"),
        ("t.csv", "a,b\n1,2\n".encode("utf-16"), "UTF-16"),
        ("t.csv", b"a,b\n1," + b"x" * 2_100_000, "longer than"),
        ("t.csv", b"a," * 30_000 + b"b\n1\n", "columns"),
        ("t.xlsx", b"whatever", "not read as data"),
        ("t.pkl", b"\x80\x04", "not read as data"),
        ("t.dta", b"junk" * 50, "not a .dta file"),
        ("t.dta", bytes([110, 2, 1, 0]) + b"\xff" * 200, "damaged"),
    ],
)
def test_bad_files_get_one_message(tmp_path, name: str, content: bytes, said: str) -> None:
    with pytest.raises(Refusal, match=said) as refused:
        read_table(written(tmp_path, name, content))
    assert refused.value.where == name
    assert "\n" not in str(refused.value)


def test_a_missing_file_and_a_folder_are_refused(tmp_path) -> None:
    (tmp_path / "folder.csv").mkdir()
    for name, said in (("none.csv", "no such file"), ("folder.csv", "not a file")):
        with pytest.raises(Refusal, match=said):
            read_table(tmp_path / name)


NUMBERING = {113: 8, 114: 10, 115: 12, 117: 13, 118: 14, 119: 15}
"""Versions of the .dta format, and what the library that writes them calls them."""


def ferries(folder, version: int):
    frame = pandas.DataFrame(
        {
            "route": pandas.array([1, 2, 1, 0], dtype="int8"),
            "cars": [0.0, 12.5, numpy.nan, 3.0],
            "season": pandas.array([2001, 2002, 2003, 2004], dtype="int32"),
            "day": [datetime.datetime(2020, 1, day) for day in (1, 2, 3, 4)],
            "note": ["a", "", "c", "d"],
        }
    )
    path = folder / "ferries.dta"
    pyreadstat.write_dta(
        frame,
        path,
        column_labels={"cars": "Cars carried, hundreds"},
        variable_value_labels={"route": {0: "east", 1: "north", 2: "south"}},
        version=NUMBERING[version],
    )
    assert f"{version}".encode() in path.read_bytes()[:40] or path.read_bytes()[0] == version
    return path


@pytest.mark.parametrize("version", NUMBERING)
def test_dta_files_keep_codes_labels_and_missing_values(tmp_path, version: int) -> None:
    table = read_table(ferries(tmp_path, version=version))
    assert table.frame["route"].tolist() == [1, 2, 1, 0]
    assert table.value_labels["route"] == {0.0: "east", 1.0: "north", 2.0: "south"}
    assert table.labels == {"cars": "Cars carried, hundreds"}
    assert table.frame["cars"].isna().tolist() == [False, False, True, False]
    assert table.frame["note"].isna().tolist() == [False, True, False, False]
    assert table.dates == ("day",)
    assert pandas.api.types.is_numeric_dtype(table.frame["day"]), "dates keep their numbers, as scripts see them"
    assert (table.frame.dtypes.drop("note") == "float64").all(), "integers are floats"
    assert table.remarks == ()


@pytest.mark.parametrize(
    ("kind", "first", "step", "width"),
    [
        (251, 101, 1, 1),
        (252, 32_741, 1, 2),
        (253, 2_147_483_621, 1, 4),
        (254, 0x7F00_0000, 0x800, 4),
        (255, 0x7FE0_0000_0000_0000, 1 << 40, 8),
    ],
    ids=["one byte", "two bytes", "four bytes", "single precision", "double precision"],
)
def test_all_27_missing_codes_of_dta_files_are_missing(tmp_path, kind: int, first: int, step: int, width: int) -> None:
    path = tmp_path / "m.dta"
    numbers = numpy.arange(28, dtype="int32") + 1000
    pyreadstat.write_dta(pandas.DataFrame({"x": numbers}), path, version=NUMBERING[114])
    codes = b"".join((first + step * each).to_bytes(width, "little") for each in range(27))
    data = bytearray(path.read_bytes().replace(numbers.tobytes(), bytes(width) + codes))
    kinds_start = 109
    assert data[kinds_start] == 253
    data[kinds_start] = kind
    path.write_bytes(bytes(data))
    x = read_table(path).frame["x"]
    assert x.isna().tolist() == [False] + [True] * 27
    assert x[0] == 0


@pytest.mark.parametrize("version", [118, 117, 114])
def test_a_dta_file_cut_anywhere_is_refused(tmp_path, version: int) -> None:
    path = ferries(tmp_path, version=version)
    whole = path.read_bytes()
    kept_whole = whole.index(b"route", len(whole) - 150) - 4 if version < 117 else None
    for length in range(1, len(whole), 1 if version < 117 else 7):
        path.write_bytes(whole[:length])
        if length != kept_whole:  # an old file that ends before a table of labels is a whole file without it
            with pytest.raises(Refusal):
                read_table(path)


def test_a_dta_file_that_promises_more_than_it_can_hold_is_refused(tmp_path) -> None:
    path = ferries(tmp_path, version=119)
    whole = path.read_bytes()
    columns, rows = whole.index(b"<K>") + 3, whole.index(b"<N>") + 3
    for place, width in ((columns, 4), (rows, 4), (rows, 7)):
        path.write_bytes(whole[:place] + (256**width // 4).to_bytes(width, "little") + whole[place + width :])
        with pytest.raises(Refusal, match="damaged"):
            read_table(path)


@pytest.mark.parametrize("version", NUMBERING)
@pytest.mark.parametrize("text", ["", "a", "abc", "long" * 800])
def test_a_dta_file_of_many_rows_is_read_whole(tmp_path, version: int, text: str) -> None:
    frame = pandas.DataFrame({f"t{each}": [text if version > 115 else text[:200], "b"] * 400 for each in range(5)})
    path = tmp_path / "t.dta"
    pyreadstat.write_dta(frame, path, version=NUMBERING[version])
    assert read_table(path).frame.equals(frame.where(frame != ""))


def test_a_dta_file_with_two_columns_of_one_name_is_refused(tmp_path) -> None:
    path = ferries(tmp_path, version=118)
    path.write_bytes(path.read_bytes().replace(b"note\0", b"cars\0"))
    with pytest.raises(Refusal, match="damaged"):
        read_table(path)


def test_texts_in_another_encoding_are_read_and_said(tmp_path) -> None:
    frame = pandas.DataFrame({"größe": [1.0, 2.0, 3.0], "ort": ["Münz", "Hof AAA", "Hof BBB"]})
    path = tmp_path / "t.dta"
    pyreadstat.write_dta(frame, path, column_labels={"ort": "Örtchen"}, version=NUMBERING[118])
    path.write_bytes(path.read_bytes().replace(b"AAA", "ä€ß".encode("cp1252")).replace(b"BBB", b"x\x81y"))
    table = read_table(path)
    assert table.frame["ort"].tolist() == ["Münz", "Hof ä€ß", "Hof x\x81y"]
    assert list(table.frame.columns) == ["größe", "ort"], "texts that keep the promise are read as promised"
    assert table.labels == {"ort": "Örtchen"}
    assert any("Western European" in remark for remark in table.remarks)


def test_a_dta_message_names_no_program(tmp_path) -> None:
    path = ferries(tmp_path, version=118)
    opening = path.read_bytes()[:100]
    path.write_bytes(opening.replace(b">118<", b">120<"))
    assert programs_named(opening.decode("latin-1")), "the format's own tag does name one"
    with pytest.raises(Refusal) as refused:
        read_table(path)
    assert "version 120" in str(refused.value)
    assert not programs_named(str(refused.value))


def described(**columns):
    frame = pandas.DataFrame(columns)
    return {each.name: each for each in describe_columns(Table("t", frame, "", {}))}


def test_descriptions_count_what_a_person_would_ask() -> None:
    found = described(x=[0.0, -1.5, numpy.nan, 3.0, 0.0], two=[0, 1, 1, 0, 1], day=["2020-01-01"] * 4 + ["2021-05-01"])
    x = found["x"]
    assert (x.missing, x.zeros, x.negatives, x.distinct, x.smallest, x.largest) == (1, 2, 1, 3, -1.5, 3.0)
    assert found["two"].kind is ColumnKind.TWO_VALUED
    assert found["day"].kind is ColumnKind.DATE


AMOUNTS = numpy.round(numpy.exp(numpy.random.default_rng(4).normal(3, 1.5, 400)), 2)
WITH_ZEROS = numpy.where(numpy.arange(400) % 4 == 0, 0.0, AMOUNTS)


def traced(made, source=WITH_ZEROS):
    noise = numpy.random.default_rng(5).normal(size=400)
    return trace_transform(Table("t", pandas.DataFrame({"noise": noise, "y": made, "amount": source}), "", {}), "y")


@pytest.mark.parametrize("constant", [1.0, 0.5, 0.01, 250.0])
def test_a_log_with_a_constant_is_traced_to_its_column_and_constant(constant: float) -> None:
    found = traced(numpy.log(WITH_ZEROS + constant))
    assert found is not None
    assert (found.source, found.transform, found.zeros) == ("amount", "log_plus", "kept")
    assert found.constant == pytest.approx(constant, rel=1e-9)


def test_the_other_transforms_are_traced() -> None:
    for made, transform in ((numpy.arcsinh(WITH_ZEROS), "asinh"), (numpy.sqrt(WITH_ZEROS), "sqrt")):
        found = traced(made)
        assert found is not None
        assert (found.source, found.transform, found.scale) == ("amount", transform, 1.0)


def test_what_became_of_zeros_is_told() -> None:
    logged = numpy.log(numpy.where(WITH_ZEROS > 0, WITH_ZEROS, 1.0))
    dropped = traced(numpy.where(WITH_ZEROS > 0, logged, numpy.nan))
    replaced = traced(numpy.where(WITH_ZEROS > 0, logged, -4.0))
    assert dropped is not None and dropped.zeros == "dropped"
    assert replaced is not None and (replaced.transform, replaced.zeros, replaced.replacement) == (
        "log",
        "replaced",
        -4,
    )


def test_rounding_and_single_precision_do_not_hide_a_transform() -> None:
    for made in (numpy.log(WITH_ZEROS + 1).round(4), numpy.log(WITH_ZEROS + 1).astype("float32")):
        found = traced(made)
        assert found is not None and found.constant == 1.0


def test_what_is_almost_a_transform_is_none() -> None:
    wrong = numpy.log(WITH_ZEROS + 1)
    wrong[7] += 0.01
    assert traced(wrong) is None
    assert traced(numpy.random.default_rng(6).normal(size=400)) is None
    assert traced(2 * WITH_ZEROS) is None


def test_a_hint_from_a_name_is_worded_as_a_guess() -> None:
    assert described(lnsales=[1.5, 2.5, 3.25])["lnsales"].hints == ("may already be a log",)
    assert described(longitude=[1.5, 2.5, 3.25])["longitude"].hints == ()


def test_no_warning_leaves_the_reader(tmp_path) -> None:
    with warnings.catch_warnings():
        warnings.simplefilter("error")
        table = read_table(ferries(tmp_path, version=118))
        assert [each.name for each in describe_columns(table)] == list(table.frame.columns)
