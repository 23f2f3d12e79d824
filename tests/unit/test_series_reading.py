"""What the rows of a log are: formats, headers, columns, missing values, and errors with their place."""

import io

import numpy as np
import pytest

from seqmix.errors import DataError, OptionError, SeqmixError
from seqmix.series import MISSING, Alphabet, open_log, read
from seqmix.series import alphabet as alphabet_module


def got(text, **options):
    """The labels of the rows of a log, None where missing."""
    series = read(io.BytesIO(text.encode() if isinstance(text, str) else text), **options)
    return [None if code == MISSING else series.alphabet.labels[code] for code in series.codes]


def opened(text, **options):
    return open_log(io.BytesIO(text.encode()), **options)


TIMED = "time,state\n2024-01-01,fill\n2024-01-02,cap\n2024-01-03,fill\n"


@pytest.mark.parametrize("text", ["", "\ufeff"])
@pytest.mark.parametrize("options", [{}, {"kind": "states"}, {"column": "state"}, {"header": True}])
def test_an_empty_log_has_no_rows(text, options):
    series = read(io.BytesIO(text.encode()), **options)
    assert (series.kind, len(series), list(series.chunks())) == ("states", 0, [])


def test_lines():
    assert got("fill\ncap\nfill") == ["fill", "cap", "fill"]
    assert got("fill") == ["fill"]
    assert got("a\n\n b \n") == ["a", None, "b"]
    assert got("hello, world\nno comma\n") == ["hello, world", "no comma"]


@pytest.mark.parametrize("word", ["", "  ", "NA", "na", "NaN", "nan", "null", "NULL", " Null "])
def test_missing_values(word):
    assert got(f"a\n{word}\nb\n") == ["a", None, "b"]
    assert got(f"a,x\n{word},x\nb,x\n", column=1) == ["a", None, "b"]


def test_all_missing_and_infinity():
    assert got("NA\n\nnull\n") == [None, None, None]
    assert got("inf\n1\nNone\n") == ["inf", "1", "None"]


@pytest.mark.parametrize("text", [TIMED, "a\n\nb\n", '{"s":"a"}\n{"s":"b"}\n', 'x;"a\nb"\ny;b\n'])
def test_line_ends_final_newline_and_bom_do_not_matter(text):
    options = {"column": 2} if ";" in text else {}
    rows = got(text, **options)
    assert got(text.replace("\n", "\r\n"), **options) == rows
    assert got(text.removesuffix("\n"), **options) == rows
    assert got("\ufeff" + text, **options) == rows


def test_csv_with_times():
    log = opened(TIMED)
    assert (log.format, log.separator, log.header) == ("csv", ",", True)
    assert (log.column, log.time_column) == ("state", "time")
    assert log.notes == [
        "the first line taken as a header; --no-header takes it as a row",
        "column 1 'time' taken as the time; --time changes it",
        "column 2 'state' taken as the value; --column changes it",
    ]
    assert got(TIMED) == ["fill", "cap", "fill"]


@pytest.mark.parametrize(("separator", "name"), [(",", "csv"), (";", "csv"), ("|", "csv"), ("\t", "tsv")])
def test_separators(separator, name):
    text = TIMED.replace(",", separator)
    assert (opened(text).format, opened(text).separator) == (name, separator)
    assert got(text) == ["fill", "cap", "fill"]


def test_a_decimal_comma_is_no_separator():
    log = opened("1,5;a\n2,5;b\n1,5;a\n", column=2)
    assert log.separator == ";"


def test_quotes_and_embedded_newlines():
    text = 'time,state\n2024-01-01,"a, b\nc"\n\n2024-01-02,"say ""x"""\n2024-01-03,5" disc\n'
    assert got(text) == ["a, b\nc", 'say "x"', '5" disc']


@pytest.mark.parametrize("column", ["state", "2", 2])
def test_a_column_by_name_or_number(column):
    text = "row,state,place\n1,fill,x\n2,cap,x\n"
    assert got(text, column=column) == ["fill", "cap"]
    assert opened(text, column=column).column == "state"


def test_a_name_comes_before_a_number():
    assert got("x,y\na,b\nc,b\n", column="2", header=False) == ["y", "b", "b"]
    assert got("2,y\na,b\nc,b\n", column="2", header=True) == ["a", "c"]


def test_time_column_asked_for():
    text = "2024-01-01,2024-02-01,a\n2024-01-02,2024-02-03,b\n"
    assert opened(text, column=3).time_column == "1"
    assert opened(text, column=3, time=2).time_column == "2"
    assert got(text, column=1, time=2) == ["2024-01-01", "2024-01-02"]


def test_columns_that_are_not_there_are_listed():
    text = "row,state,place\n1,fill,x\n2,cap,x\n"
    listed = "its columns are 1 'row', 2 'state', 3 'place'"
    with pytest.raises(OptionError, match=rf"which column of <file>\? Say --column NAME or NUMBER; {listed}"):
        got(text)
    for wanted in ("status", "4", 0, "-1"):
        with pytest.raises(OptionError, match=f"<file> has no column '{wanted}'; {listed}"):
            got(text, column=wanted)
    with pytest.raises(OptionError, match=r"its columns are 1 .like '1'., 2 .like 'a'., 3 .like 'x'."):
        got("1,a,x\n2,b,x\n")
    with pytest.raises(OptionError, match="cannot be both"):
        got(TIMED, column="time", time="time")
    with pytest.raises(OptionError, match="one value a line, and no column of times"):
        got("a\nb\n", time=1)
    with pytest.raises(OptionError, match="has no column 'x'"):
        got("a\nb\n", column="x")


@pytest.mark.parametrize(
    ("text", "header"),
    [
        ("row,state\n1,a\n2,b\n", True),  # numbers below
        ("time,state\n2024-01-01,a\n2024-01-02,b\n", True),  # times below
        ("name,place\na,x\nb,x\n", True),  # values repeat, the first row does not
        ("a,x\nb,x\na,y\n", False),  # the first row comes again
        ("a,b\nc,d\n", False),  # nothing repeats
        ("1,state\n2,a\n3,b\n", False),  # a number in the first row
        ("a,\n1,b\n2,b\n", False),  # a blank in the first row
        ("a,a\n1,b\n2,b\n", False),  # the same name twice
        ("2024-01-01,a\n2024-01-02,a\n", False),
    ],
)
def test_whether_there_is_a_header(text, header):
    assert opened(text, column=2, kind="states").header is header
    assert len(got(text, column=2, kind="states")) == text.count("\n") - header
    for forced in (True, False):
        assert opened(text, column=2, kind="states", header=forced).header is forced


def test_a_header_asked_for_by_name():
    assert got("a,b\nc,d\n", column="b") == ["d"]
    assert got("a,b\n", column="b") == []
    assert got("state\nfill\n", column="state") == ["fill"]
    assert got("state\nfill\n", column=1) == ["state", "fill"]
    assert got("state\nfill\n", header=True) == ["fill"]


def test_json_objects():
    text = '{"t": "2024-01-01", "s": "a"}\n\n{"t": "2024-01-02"}\n{"s": 1.50, "t": "2024-01-03", "x": []}\n'
    text += '{"t": "2024-01-04", "s": true}\n{"t": "2024-01-05", "s": null}\n{"t": "2024-01-06", "s": " a"}\n'
    log = opened(text)
    assert (log.format, log.column, log.time_column, log.header) == ("jsonl", "s", "t", False)
    assert got(text) == ["a", None, "1.50", "true", None, " a"]


def test_json_values():
    assert got('"fill"\n"a, b"\nnull\n\n7\nfalse\n"NA"\n') == ["fill", "a, b", None, "7", "false", None]
    assert got('"\\ud800"\n') == ["\\ud800"]


NUMERIC = [
    ("1\n2.5\nNA\n-3e4\n", {}, [1, 2.5, None, -3e4]),
    ("\n +.5 \n7.\n", {}, [None, 0.5, 7]),
    ("row;x\na;1\nb;\nc;2\n", {"column": "x"}, [1, None, 2]),
    ("time,level\n2024-01-01,12.50\n2024-01-02,null\n", {}, [12.5, None]),
    ('{"x": 1}\n{"y": 2}\n{"x": 1e-300}\n{"x": NaN}\n', {"column": "x"}, [1, None, 1e-300, None]),
    ('{"x": "1"}\n{"x": 2}\n', {"column": "x", "kind": "numbers"}, [1, 2]),
    ("12\n12.658579999999999\n1e300\n", {"kind": "numbers"}, [12, 12.658579999999999, 1e300]),
]


@pytest.mark.parametrize(("text", "options", "numbers"), NUMERIC)
def test_numbers(text, options, numbers):
    series = read(io.BytesIO(text.encode()), **options)
    assert (series.kind, len(series.alphabet)) == ("numbers", 0)
    assert (series.values.dtype, series.codes.dtype) == (np.float64, np.int32)
    assert [None if np.isnan(value) else value for value in series.values] == numbers
    assert series.codes.tolist() == [MISSING if number is None else 0 for number in numbers]
    states = read(io.BytesIO(text.encode()), **{**options, "kind": "states"})
    assert (states.kind, states.values) == ("states", None)
    assert (states.codes == MISSING).tolist() == (series.codes == MISSING).tolist()


@pytest.mark.parametrize("word", ["inf", "-INF", "+Infinity", "-nan", "1e999", "-1e999"])
def test_numbers_that_are_not_finite_are_missing(word):
    series = read(io.BytesIO(f"1\n{word}\n2\nNA\n".encode()))
    assert series.codes.tolist() == [0, MISSING, 0, MISSING]
    assert np.isnan(series.values).tolist() == [False, True, False, True]
    noted = [] if word == "-nan" else ["numbers that are not finite, taken as missing: 1"]
    assert series.notes == noted
    assert read(io.BytesIO(f"{word}\n".encode())).kind == "states"


@pytest.mark.parametrize(
    "text", ["1\nx\n", "1_000\n2\n", "１\n2\n", "0x10\n1\n", "1,5\n2,5\n", '"1"\n"2"\n', "1\nNone\n"]
)
def test_what_is_not_all_numbers_is_states(text):
    options = {"column": 2, "kind": "states"} if "," in text else {}
    assert read(io.BytesIO(text.encode()), **options).kind == "states"


def test_numbers_in_a_log_of_whole_chunks_and_more():
    values = np.round(np.random.default_rng(0).normal(size=10_000), 3)
    text = "\n".join(map(str, values)).encode()
    series = read(io.BytesIO(text))
    assert series.values.tolist() == values.tolist()
    chunks = list(open_log(io.BytesIO(text)).chunks())
    assert [len(rows.values) for rows in chunks] == [4096, 4096, 10_000 - 8192]
    assert all(rows.cells is None for rows in chunks)


@pytest.mark.parametrize(
    ("text", "options", "message"),
    [
        ("1\n" * 5000 + "\nj\x1b[2Jm\n", {}, "5002:1: not a number: 'j\\x1b[2Jm'"),
        ("level\n" + "1\n" * 5000 + "x\n", {"column": "level"}, "5002:1: not a number: 'x'"),
        ("a\n", {"kind": "numbers"}, "1:1: not a number: 'a'"),
        ("1\n\n1_000\n", {"kind": "numbers"}, "3:1: not a number: '1_000'"),
        ("1\n２\n", {"kind": "numbers"}, "2:1: not a number: '２'"),
        (TIMED.replace("cap", "7"), {"kind": "numbers"}, "2:2: not a number: 'fill'"),
        ('x,y\n"\n",1\nb,2\n\nc,ok\n', {"column": "y", "kind": "numbers"}, "6:2: not a number: 'ok'"),
        ('{"x": 1}\n{"x": true}\n', {"kind": "numbers"}, "2:1: not a number: 'true'"),
    ],
)
def test_text_in_a_log_of_numbers_is_an_error(text, options, message):
    with pytest.raises(DataError) as error:
        read(io.BytesIO(text.encode()), **options)
    assert str(error.value) == f"<file>:{message}; --as states takes every distinct value as a state"


def test_kinds():
    assert got("1\n2\n1\n", kind="states") == ["1", "2", "1"]
    assert got('"1"\n"2"\n') == ["1", "2"]
    assert read(io.BytesIO(b""), kind="numbers").values.tolist() == []
    with pytest.raises(OptionError, match="no kind 'x'; the kinds are states, numbers, bytes"):
        got("a\n", kind="x")


@pytest.mark.parametrize("data", [b"\0\1", b"caf\xe9\n", b"\x89PNG\r\n"])
def test_what_is_no_text_is_bytes(data):
    series = read(io.BytesIO(data))
    assert (series.kind, series.format, series.codes.tolist()) == ("bytes", "bytes", list(data))
    assert series.notes == ["taken as bytes, as it is not UTF-8 text; --as states takes it as text"]
    with pytest.raises(DataError):
        read(io.BytesIO(data), kind="states")


def test_bytes_asked_for():
    series = read(io.BytesIO(b"\xef\xbb\xbfa\r\n"), kind="bytes")
    assert (series.codes.tolist(), series.notes) == ([0xEF, 0xBB, 0xBF, 97, 13, 10], [])
    for option in ({"column": 1}, {"time": 1}, {"header": True}):
        with pytest.raises(OptionError, match="bytes, which have no columns and no header"):
            read(io.BytesIO(b"a"), kind="bytes", **option)


@pytest.mark.parametrize(
    ("data", "options", "message"),
    [
        (
            b"a\nb\xff\n",
            {"kind": "states"},
            r"2:2: the byte \xff is not UTF-8 text; --as bytes reads the log as bytes",
        ),
        (
            b"a\n\xc3\xa9\0\n",
            {"kind": "states"},
            r"2:2: the byte \x00 is not UTF-8 text; --as bytes reads the log as bytes",
        ),
        (
            b"a\n" * 9000 + b"\x80",
            {},
            r"9001:1: the byte \x80 is not UTF-8 text; --as bytes reads the log as bytes",
        ),
        (TIMED + "2024-01-04,a,b\n", {}, "5: 3 cells where 2 were expected: '2024-01-04,a,b'"),
        (TIMED + "2024-01-04\n", {}, "5: 1 cells where 2 were expected: '2024-01-04'"),
        (TIMED + "x\x1b[2J,a\n", {}, r"5:1: not a time in ISO 8601, like 2000-01-31T23:59:00: 'x\x1b[2J'"),
        (TIMED + ",a\n", {}, "5:1: not a time in ISO 8601, like 2000-01-31T23:59:00: ''"),
        (TIMED + "2023-02-29,a\n", {}, "5:1: no such date or time of day: '2023-02-29'"),
        (
            TIMED + "2024-01-04T00Z,a\n",
            {},
            "5:1: not a time in ISO 8601, like 2000-01-31T23:59:00: '2024-01-04T00Z'",
        ),
        (
            TIMED + "2024-01-04T00:00Z,a\n",
            {},
            "5:1: a time with an offset, while the first has none: '2024-01-04T00:00Z'",
        ),
        (TIMED + '2024-01-04,"a\nb\n', {}, "5: a quote is opened here and never closed"),
        (
            TIMED + '2024-01-04,"a"b\n2024-01-05,a\n',
            {},
            "5: quotes that do not match (',' expected after '\"'); double a quote inside quotes",
        ),
        (
            TIMED + "2024-01-04,a\rb\n",
            {},
            "5: a carriage return that no line feed follows; end lines with LF or CRLF",
        ),
        ('{"s":"a"}\n\n{"s":"b"\n', {}, "3:9: not JSON: Expecting ',' delimiter: '{\"s\":\"b\"'"),
        ('{"s":"a"}\n4\n', {}, "2: not an object as the first line is: '4'"),
        ('{"s":"a"}\n{"s":["b"]}\n', {}, '2: a nested value, not a text, number or boolean: \'{"s":["b"]}\''),
        ('["a"]\n["b"]\n', {}, "1: a nested value, not a text, number or boolean: '[\"a\"]'"),
        ('"a"\n' * 5000 + "[" * 50_000, {}, "5001:1: not JSON: nested too deeply: '" + "[" * 79 + "…'"),
    ],
)
def test_errors_name_their_place(data, options, message):
    with pytest.raises(DataError) as error:
        got(data, **options)
    assert str(error.value) == f"<file>:{message}"


def test_a_record_over_the_cap_is_an_error():
    text = TIMED + '2024-01-04,"' + "x\n" * (9 << 20)
    with pytest.raises(DataError, match=r"<file>:5: a record of more than 16 MiB; is a quote never closed\?"):
        got(text)


@pytest.mark.parametrize("form", ["s{}\n", "x;s{}\n", '{{"s": "s{}"}}\n'])
def test_rows_in_and_after_the_sample_are_read_alike(form):
    text = "".join(form.format(row % 7) for row in range(10_000))
    options = {"column": 2} if ";" in form else {}
    assert got(text, **options) == [f"s{row % 7}" for row in range(10_000)]


def test_an_alphabet_goes_on():
    first = read(io.BytesIO(b"a\nb\n"))
    second = read(io.BytesIO(b"c\nb\n"), alphabet=first.alphabet)
    assert second.codes.tolist() == [2, 1]
    assert first.alphabet.labels == ["a", "b", "c"]
    assert got("1\n2\n", alphabet=first.alphabet) == ["1", "2"]
    assert read(io.BytesIO(b"ab"), alphabet=Alphabet.for_bytes()).codes.tolist() == [97, 98]
    for kind in ("bytes", "numbers"):
        with pytest.raises(OptionError, match=f"the alphabet is one of states, so the log cannot be read as {kind}"):
            got("a\n", kind=kind, alphabet=first.alphabet)
    first = read(io.BytesIO(b"1\n2\n"))
    assert read(io.BytesIO(b"3\n"), kind=first.kind, alphabet=first.alphabet).values.tolist() == [3]


def test_the_labels_of_bytes():
    alphabet = Alphabet.for_bytes()
    assert len(set(alphabet.labels)) == len(alphabet) == 256
    assert [alphabet.labels[byte] for byte in b"A '\"\n\0\\\xff"] == [
        "A",
        " ",
        "'",
        '"',
        r"\n",
        r"\x00",
        r"\\",
        r"\xff",
    ]
    assert all(label.isascii() and label.isprintable() for label in alphabet.labels)
    assert (alphabet.code("A"), alphabet.encode("A"), alphabet.code("é")) == (65, 65, None)
    with pytest.raises(KeyError):
        alphabet.encode("é")


def test_too_many_states_are_an_error(monkeypatch):
    monkeypatch.setattr(alphabet_module, "MAX_STATES", 10)
    with pytest.raises(DataError, match="<file>: more than 10 different states; take another column"):
        got("".join(f"s{row}\n" for row in range(11)))


def test_a_log_is_read_once():
    with opened("a\nb\n") as log:
        assert len(list(log.chunks())) == 1
        with pytest.raises(SeqmixError, match=r"<file> was read before; seqmix\.read keeps a log in memory"):
            log.chunks()
