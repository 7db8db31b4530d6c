"""The further columns of an input whose values are handed on as they are."""

from typing import Any

import pyarrow as pa

from sparkrank.errors import InputRefused
from sparkrank.shown import SHOWN_CHARACTERS, shown_value

MAX_ATTRIBUTES = 32
"""More columns than that are a table of their own, which a reviewer joins by host."""


def attribute_kinds(where: str, schema: Any, own: tuple[str, ...]) -> dict[str, str]:
    """What the schema's columns other than the program's ``own`` hold, by name.

    InputRefused where there are too many, and by name for one that cannot be handed on.
    """
    names = [name for name in schema.names if name not in own]
    if len(names) > MAX_ATTRIBUTES:
        raise InputRefused(
            f"{where}: expected at most {MAX_ATTRIBUTES} columns beside {', '.join(own)}, "
            f"found {len(names)}; leave out those that no reviewer needs"
        )
    kinds = {}
    for name in names:
        if names.count(name) > 1:
            raise InputRefused(
                f"{where}: expected one column {shown_value(name)}, found {names.count(name)}; rename columns"
            )
        if shown_value(name) != name:
            raise InputRefused(
                f"{where}: expected column names of at most {SHOWN_CHARACTERS} characters, none of them a "
                f"control character, found {shown_value(name)}; rename the column"
            )
        found = schema.field(name).type
        kind = _kind(found.value_type if pa.types.is_dictionary(found) else found)
        if kind is None:
            raise InputRefused(
                f"{where}: expected column {name} to be text, numbers, booleans, dates or times, "
                f"found {shown_value(str(found))}; convert or leave out the column"
            )
        kinds[name] = kind
    return kinds


def _kind(arrow_type: Any) -> str | None:
    types = pa.types
    kinds = {
        "text": (types.is_string, types.is_large_string, types.is_string_view),
        "a whole number": (types.is_integer,),
        "a number": (types.is_floating, types.is_decimal),
        "a boolean": (types.is_boolean,),
        "a date": (types.is_date,),
        "a time": (types.is_timestamp,),
        "nulls only": (types.is_null,),
    }
    return next((kind for kind, tests in kinds.items() if any(test(arrow_type) for test in tests)), None)
