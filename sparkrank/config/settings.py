"""One setting: its kind, its help text, its range, and the check of a value against them."""

import dataclasses
import math
import re
from collections.abc import Callable
from enum import Enum
from typing import Any

from sparkrank.shown import shown_value


class Kind(Enum):
    """What a setting holds; the value is the wording of messages and of the reference."""

    TEXT = "text"
    PATH = "a path or URI"
    NUMBER = "a number"
    INTEGER = "a whole number"
    BOOLEAN = "true or false"
    TEXTS = "a list of texts"


@dataclasses.dataclass(frozen=True, kw_only=True)
class Setting:
    """The declaration of one setting.

    `expected` words the type and range for messages ("a number above 0 and below 1"), `accepts` decides the
    range of a value that already has the right type, `reason` says where the default comes from (or, without
    a default, what to think of when choosing a value).
    """

    kind: Kind
    help: str
    reason: str
    expected: str
    accepts: Callable[[Any], bool]


def setting(
    kind: Kind,
    help: str,
    *,
    reason: str,
    default: object = dataclasses.MISSING,
    expected: str | None = None,
    accepts: Callable[[Any], bool] = lambda value: True,
) -> Any:
    """A dataclass field that carries its `Setting`; without a default the setting is required."""
    declared = Setting(kind=kind, help=help, reason=reason, expected=expected or kind.value, accepts=accepts)
    return dataclasses.field(default=default, metadata={"setting": declared})


def choice(help: str, *choices: str, reason: str) -> Any:
    """A text setting with few allowed values; the first is the default."""
    words = " or ".join(f'"{word}"' for word in choices)
    return setting(
        Kind.TEXT, help, reason=reason, default=choices[0], expected=words, accepts=lambda v: v in choices
    )


def checked_value(declared: Setting, value: object) -> object:
    """The value in the setting's own type (a whole number becomes a float where a number is expected).

    Raises ValueError with the text "expected …, found …" for a wrong type or a value out of range. A boolean
    is never taken for a number, though Python would.
    """
    typed = _typed(declared.kind, value)
    if typed is None or not declared.accepts(typed):
        raise ValueError(f"expected {declared.expected}, found {shown_setting(value)}")
    return typed


def shown_setting(value: object) -> str:
    """A value as it is written in TOML where that is short, on one line in any case."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, str):
        return f'"{shown_value(value)}"' if value else "an empty text"
    if isinstance(value, int):
        # Python refuses to print whole numbers of thousands of digits.
        return str(value) if abs(value) < 10**40 else "a whole number of more than 40 digits"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list | tuple):
        return "[" + ", ".join(shown_setting(item) for item in value[:5]) + (", …]" if value[5:] else "]")
    return shown_value(str(value))


def _typed(kind: Kind, value: object) -> object | None:
    if kind is Kind.BOOLEAN:
        return value if isinstance(value, bool) else None
    if kind is Kind.INTEGER:
        return value if isinstance(value, int) and not isinstance(value, bool) else None
    if kind is Kind.NUMBER:
        return _finite_number(value)
    if kind is Kind.TEXTS:
        if not isinstance(value, list | tuple) or not all(isinstance(item, str) and item for item in value):
            return None
        return tuple(value)
    if not isinstance(value, str):
        return None
    # No path that a person means holds a control character; a NUL would fail far from here.
    return None if kind is Kind.PATH and re.search(r"[\x00-\x1f\x7f]", value) else value


def _finite_number(value: object) -> float | None:
    if isinstance(value, bool) or not isinstance(value, int | float):
        return None
    try:
        number = float(value)
    except OverflowError:
        return None
    return number if math.isfinite(number) else None
