"""How a foreign string is shown: in messages, in `rejected_rows`, on a terminal.

Host names come from strangers. Shown as they are, a control character could move a terminal's cursor and a
direction mark could make one name read as another, so both are escaped; the length is bounded because a
"name" may be megabytes long.
"""

import re

SHOWN_CHARACTERS = 200
"""The longest shown value, in characters (the limit of `rejected_rows.row_value`)."""

# C0, DEL and C1 controls, the line and paragraph separators, the marks that reorder text, lone surrogates.
_UNSAFE = re.compile("[\x00-\x1f\x7f-\x9f\u200e\u200f\u2028-\u202e\u2066-\u2069\ud800-\udfff]")


def shown_value(value: str) -> str:
    """The value as a person may safely see it: at most 200 characters, control characters escaped.

    An escape is `\\x0a` up to U+00FF and `\\u2028` beyond. The cut comes first and again after escaping, so
    that the cost does not grow with the value and the limit holds for the result.
    """
    escaped = _UNSAFE.sub(_escape, value[:SHOWN_CHARACTERS])
    return escaped[:SHOWN_CHARACTERS]


def one_line(error: BaseException) -> str:
    """An exception's text on one line, for use inside a refusal (libraries write several lines)."""
    text = " ".join(str(error).split())
    return shown_value(text) or type(error).__name__


def _escape(match: re.Match[str]) -> str:
    code = ord(match.group())
    return f"\\x{code:02x}" if code <= 0xFF else f"\\u{code:04x}"
