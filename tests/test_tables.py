"""Data files become tables: what counts as a number, what is missing, and what is refused."""

import datetime
import warnings

import numpy
import pandas
import pytest

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


def ferries(folder, **options):
    frame = pandas.DataFrame(
        {
            "route": pandas.Categorical(["north", "south", "north", "east"]),
            "cars": [0.0, 12.5, numpy.nan, 3.0],
            "season": pandas.array([2001, 2002, 2003, 2004], dtype="int32"),
            "day": [datetime.datetime(2020, 1, day) for day in (1, 2, 3, 4)],
            "note": ["a", "", "c", "d"],
        }
    )
    path = folder / "ferries.dta"
    frame.to_stata(path, write_index=False, variable_labels={"cars": "Cars carried, hundreds"}, **options)
    return path


@pytest.mark.parametrize("version", [114, 117, 118, 119])
def test_dta_files_keep_codes_labels_and_missing_values(tmp_path, version: int) -> None:
    table = read_table(ferries(tmp_path, version=version))
    assert table.frame["route"].tolist() == [1, 2, 1, 0]
    assert table.value_labels["route"] == {0.0: "east", 1.0: "north", 2.0: "south"}
    assert table.labels == {"cars": "Cars carried, hundreds"}
    assert table.frame["cars"].isna().tolist() == [False, False, True, False]
    assert table.frame["note"].isna().tolist() == [False, True, False, False]
    assert table.dates == ("day",)
    assert pandas.api.types.is_numeric_dtype(table.frame["day"]), "dates keep their numbers, as scripts see them"


def test_all_27_missing_codes_of_dta_files_are_missing(tmp_path) -> None:
    codes = [pandas.io.stata.StataMissingValue(code) for code in range(101, 128)]
    assert len(codes) == 27
    path = tmp_path / "m.dta"
    pandas.DataFrame({"x": numpy.arange(28, dtype="int8")}).to_stata(path, write_index=False, version=114)
    data = bytearray(path.read_bytes())
    place = bytes(data).rindex(bytes(range(28)))
    data[place + 1 : place + 28] = bytes(range(101, 128))
    path.write_bytes(bytes(data))
    assert read_table(path).frame["x"].isna().tolist() == [False] + [True] * 27


def test_a_dta_file_cut_anywhere_is_refused(tmp_path) -> None:
    path = ferries(tmp_path, version=118)
    whole = path.read_bytes()
    for length in range(1, len(whole) - 30, max(1, len(whole) // 60)):
        path.write_bytes(whole[:length])
        with pytest.raises(Refusal):
            read_table(path)


def test_a_dta_message_names_no_program(tmp_path) -> None:
    path = written(tmp_path, "t.dta", b"<stata_dta><header><release>120</release>" + b"x" * 100)
    with pytest.raises(Refusal) as refused:
        read_table(path)
    assert "version 120" in str(refused.value)
    assert "stata" not in str(refused.value).lower()


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
        describe_columns(read_table(ferries(tmp_path, version=118)))
