"""The CSV reader against RFC 4180's own rules and Python's writer."""

import csv
import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.names.rfc4180 import read_records


@pytest.mark.parametrize(
    ("text", "records"),
    [
        # Section 2 of RFC 4180, rules 1 to 7, in order.
        ("aaa,bbb,ccc\r\nzzz,yyy,xxx\r\n", [(1, ["aaa", "bbb", "ccc"]), (2, ["zzz", "yyy", "xxx"])]),
        ("aaa,bbb,ccc\r\nzzz,yyy,xxx", [(1, ["aaa", "bbb", "ccc"]), (2, ["zzz", "yyy", "xxx"])]),
        ("aaa,b b, c", [(1, ["aaa", "b b", " c"])]),
        ('"aaa","bbb"\r\nzzz,yyy', [(1, ["aaa", "bbb"]), (2, ["zzz", "yyy"])]),
        ('"aaa","b\r\nbb",c\r\nz,y,x', [(1, ["aaa", "b\r\nbb", "c"]), (2, ["z", "y", "x"])]),
        ('"aaa","b""bb"', [(1, ["aaa", 'b"bb'])]),
        # Line feeds alone, blank lines, empty fields at every place.
        ("a\nb\n", [(1, ["a"]), (2, ["b"])]),
        ("a\n\n\r\nb\n\n", [(1, ["a"]), (4, ["b"])]),
        ('""\n', [(1, [""])]),
        (",\n,", [(1, ["", ""]), (2, ["", ""])]),
        ("", []),
        ('""""', [(1, ['"'])]),
    ],
)
def test_examples(text: str, records: list[tuple[int, list[str]]]) -> None:
    assert list(read_records(text)) == records


@pytest.mark.parametrize(
    ("text", "row", "character"),
    [('a"b', 1, 1), ("a\nb\rc", 2, 3), ('a\n"b', 2, 3), ('"a"b', 1, 1), ("a\r", 1, 1), ('a\n"b"" ,', 2, 3)],
)
def test_refused(text: str, row: int, character: int) -> None:
    with pytest.raises(ValueError, match=f"in row {row}, near character {character} of the file"):
        list(read_records(text))


FIELDS = st.text(st.sampled_from('a,"\r\n é\x00;') | st.characters(codec="utf-8"))


@given(
    st.lists(st.lists(FIELDS, min_size=2, max_size=4)),
    # Python's writer leaves a carriage return unquoted when its rows end in a line feed alone.
    st.sampled_from([("\r\n", csv.QUOTE_MINIMAL), ("\r\n", csv.QUOTE_ALL), ("\n", csv.QUOTE_ALL)]),
)
def test_reads_what_a_strict_writer_wrote(rows: list[list[str]], style: tuple[str, int]) -> None:
    end, quoting = style
    buffer = io.StringIO(newline="")
    csv.writer(buffer, lineterminator=end, quoting=quoting).writerows(rows)
    assert [record for _, record in read_records(buffer.getvalue())] == rows
