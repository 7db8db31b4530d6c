"""CSV exactly as RFC 4180 has it, with the line ends CRLF and LF.

Python's own reader accepts what the RFC does not (a quote inside a plain field, a lone carriage return),
and would so read one row where its author meant two.
"""

import re
from collections.abc import Iterator

# Possessive, so that a missing closing quote costs one pass instead of a search.
_FIELD = re.compile(r'(?:"([^"]*+(?:""[^"]*+)*+)"|([^",\r\n]*+))(,|\r\n|\n|\Z)')


def read_records(text: str) -> Iterator[tuple[int, list[str]]]:
    """The records as (row number from 1, fields); blank lines hold no record but count as rows.

    Raises ValueError that names the row where the text is not RFC 4180.
    """
    row, position, quoted_any = 1, 0, False
    record: list[str] = []
    while position < len(text):
        match = _FIELD.match(text, position)
        if match is None:
            raise ValueError(
                f"a misplaced quote or a lone carriage return in row {row}, "
                f"near character {position + 1} of the file"
            )
        quoted, plain, end = match.groups()
        record.append(plain if quoted is None else quoted.replace('""', '"'))
        quoted_any = quoted_any or quoted is not None
        position = match.end()
        if end != ",":
            if record != [""] or quoted_any:
                yield row, record
            row, record, quoted_any = row + 1, [], False
    if record:
        # The text ends in a comma: one more field, and it is empty.
        yield row, [*record, ""]
