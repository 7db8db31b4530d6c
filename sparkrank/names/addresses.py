"""IP addresses in host names, as the WHATWG URL standard reads and writes them.

Source: URL Standard, sections 3.5 "Host parsing" and 3.6 "Host serializing" (url.spec.whatwg.org).
"""

import re

_OCTAL = re.compile(r"[0-7]*\Z")
_DECIMAL = re.compile(r"[0-9]*\Z")
_HEXADECIMAL = re.compile(r"[0-9a-fA-F]*\Z")
_DOTTED_PART = re.compile(r"(?:0|[1-9][0-9]{0,2})\Z")
_PIECE = re.compile(r"[0-9a-fA-F]{1,4}\Z")

# Larger than any address; stands for numbers with so many digits that reading them is pointless.
_TOO_LARGE = 1 << 40


def _ipv4_number(text: str) -> int | None:
    """The number a part of an IPv4 address stands for (decimal, 0 octal, 0x hexadecimal), or None."""
    if text == "":
        return None
    digits, base, allowed = text, 10, _DECIMAL
    if text[:2] in ("0x", "0X"):
        digits, base, allowed = text[2:], 16, _HEXADECIMAL
    elif len(text) > 1 and text[0] == "0":
        digits, base, allowed = text[1:], 8, _OCTAL
    if not allowed.match(digits):
        return None
    digits = digits.lstrip("0")
    if len(digits) > 16:
        return _TOO_LARGE
    return int(digits, base) if digits else 0


def ends_in_number(host: str) -> bool:
    """True if the last label of an ASCII host is a number, so that the host can only be an IPv4 address."""
    parts = host.split(".")
    if parts[-1] == "" and len(parts) > 1:
        parts.pop()
    last = parts[-1]
    return last != "" and (last.isdigit() or _ipv4_number(last) is not None)


def read_ipv4(host: str) -> str | None:
    """Dotted form of an IPv4 address in any form the standard knows (`0x7f.1`, `017700000001`), or None."""
    parts = host.split(".")
    if parts[-1] == "" and len(parts) > 1:
        parts.pop()
    numbers = [_ipv4_number(part) for part in parts]
    if len(parts) > 4:
        return None
    address = 0
    for position, number in enumerate(numbers):
        if number is None or (position < len(numbers) - 1 and number > 255):
            return None
        if position == len(numbers) - 1:
            if number >= 256 ** (5 - len(numbers)):
                return None
            address += number
        else:
            address += number << (8 * (3 - position))
    return ".".join(str(address >> shift & 255) for shift in (24, 16, 8, 0))


def is_dotted_ipv4(host: str) -> bool:
    """True for exactly four decimal parts of 0 to 255 without leading zeros."""
    parts = host.split(".")
    return len(parts) == 4 and all(_DOTTED_PART.match(part) and int(part) < 256 for part in parts)


def read_ipv6(text: str) -> str | None:
    """Canonical form, without brackets, of an IPv6 address written without brackets, or None."""
    pieces = _ipv6_pieces(text)
    return None if pieces is None else _write_ipv6(pieces)


def _ipv6_pieces(text: str) -> list[int] | None:
    """The eight 16-bit pieces. At most one `::` stands for one or more zero pieces."""
    head, compressed, tail = text.partition("::")
    if not compressed:
        pieces = _pieces_of(head, ipv4_allowed=True)
        return pieces if pieces is not None and len(pieces) == 8 else None
    before = _pieces_of(head, ipv4_allowed=False) if head else []
    after = _pieces_of(tail, ipv4_allowed=True) if tail else []
    if before is None or after is None or len(before) + len(after) > 7:
        return None
    return before + [0] * (8 - len(before) - len(after)) + after


def _pieces_of(text: str, *, ipv4_allowed: bool) -> list[int] | None:
    """Pieces of colon-separated groups; the last group may be a dotted IPv4 address at an address's end."""
    if len(text) > 45:  # eight full groups, or six and a dotted IPv4 address, fit in 45 characters
        return None
    pieces: list[int] = []
    groups = text.split(":")
    for position, group in enumerate(groups):
        if _PIECE.match(group):
            pieces.append(int(group, 16))
        elif ipv4_allowed and position == len(groups) - 1 and is_dotted_ipv4(group):
            a, b, c, d = (int(part) for part in group.split("."))
            pieces += [a << 8 | b, c << 8 | d]
        else:
            return None
    return pieces


def _write_ipv6(pieces: list[int]) -> str:
    """Lower-case hexadecimal; the first longest run of two or more zero pieces becomes `::`."""
    start, length = 0, 1
    position = 0
    while position < 8:
        end = position
        while end < 8 and pieces[end] == 0:
            end += 1
        if end - position > length:
            start, length = position, end - position
        position = end + 1
    written = [f"{piece:x}" for piece in pieces]
    if length == 1:
        return ":".join(written)
    return ":".join(written[:start]) + "::" + ":".join(written[start + length :])
