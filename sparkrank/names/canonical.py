"""The canonical host of a row's value: the one name under which a host is a node.

A value that contains `//` is a URL and is read as the WHATWG URL standard (url.spec.whatwg.org) reads
it without a base. Any other value is a bare host, at most with `:port` or `/path`. Both come out as
lower-case ASCII: a name with IDNA labels in their `xn--` form, a dotted IPv4 address, or an IPv6 address
in brackets.

Deviations from the standard, all deliberate:

URLs
1. `//host/path` without a scheme is read as `http`: the link is relative to a page of the web.
2. `file:` URLs are rejected: their hosts are not hosts of the web.
3. The host of a URL whose scheme is not http, https, ftp, ws or wss is opaque to the standard. It is
   accepted only if it is an IPv6 address, or already what the standard would make of it in an `http` URL.
4. URLs without a host are rejected (`data:///x`, `blob:https://…`).

Bare hosts (which the standard does not know)
5. Rejected are: white space, control characters, `?` and `#` anywhere; `@`, `\\` and `%` in the host;
   empty labels; a port without digits (`http:/x` is a damaged URL, not a host named `http`).
6. A name whose last label is a number is rejected unless it is an IPv4 address of four decimal parts
   without leading zeros.

Both
7. One trailing dot is removed; what has no characters but dots is rejected.
8. Names over 253 characters and labels over 63 are rejected: DNS cannot carry them. So is, unread, a
   host of more than 1,024 characters before mapping.
9. A label in `xn--` form must be exactly what an encoder writes for its Unicode form.

URLs follow the standard for empty labels within a name, so `http://a..test/` is the host `a..test`.
Unicode properties are those of the `idna` package and, for direction and normal form, of Python.
"""

import re
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from urllib.parse import unquote_to_bytes

from sparkrank.names.addresses import ends_in_number, is_dotted_ipv4, read_ipv4, read_ipv6
from sparkrank.names.idn import MAX_INPUT_CHARACTERS, domain_to_ascii

REASONS: Mapping[str, str] = MappingProxyType(
    {
        "null": "the value is null",
        "empty": "the value is an empty string",
        "no_scheme": "the value contains // but starts neither with a scheme nor with //",
        "file_url": "a file URL names no host of the web",
        "no_host": "the value names no host, or only dots",
        "bad_port": "what follows the host's colon is not a port of 0 to 65535",
        "bad_character": "the host contains a character that hosts cannot have",
        "not_bare": "a value without // may be a host, a port and a path, nothing else",
        "empty_label": "the bare host contains an empty label",
        "bad_ipv4": "the last label is a number, but the host is not an IPv4 address",
        "bad_ipv6": "the host starts with a bracket, but is not an IPv6 address",
        "bad_idna": "the host has no ASCII form under IDNA",
        "opaque_host": "the host of a URL other than http, https, ftp, ws or wss is not canonical",
        "too_long": "the host has over 253 characters, or a label of over 63",
    }
)
"""Every reason for which a value is rejected, with its explanation."""

MAX_NAME_CHARACTERS = 253
MAX_LABEL_CHARACTERS = 63

_SCHEME = re.compile(r"([A-Za-z][A-Za-z0-9+.\-]*):")
_SPECIAL_SCHEMES = frozenset({"http", "https", "ftp", "ws", "wss"})
_C0_AND_SPACE = "".join(map(chr, range(0x21)))
_TAB_AND_NEWLINE = str.maketrans("", "", "\t\n\r")
_SPECIAL_AUTHORITY_END = re.compile(r"[/?#\\]")
_AUTHORITY_END = re.compile(r"[/?#]")
_FORBIDDEN_IN_DOMAIN = re.compile(r"[\x00-\x20\x7f#/:<>?@\[\\\]^|%]")
_NOT_BARE = re.compile(r"[\x00-\x20\x7f?#]")
_NOT_BARE_HOST = re.compile(r"[@\\%]")


@dataclass(frozen=True, kw_only=True, slots=True)
class CanonicalName:
    """What a value names: `host` is set and `reason` None, or `host` None and `reason` a key of REASONS."""

    host: str | None = None
    reason: str | None = None


class _RejectionError(Exception):
    """Carries a reason code out of the parser; never leaves this module."""


def canonical_host(value: str | None) -> CanonicalName:
    """The canonical host of a URL or a bare host, or the reason why there is none.

    Source: WHATWG URL Standard, sections 3 and 4.4, with the deviations this module lists. Never raises.
    """
    try:
        if value is None:
            raise _RejectionError("null")
        if value == "":
            raise _RejectionError("empty")
        host = _host_of_url(value) if "//" in value else _host_of_bare(value)
        return CanonicalName(host=_within_dns_limits(host))
    except _RejectionError as rejected:
        return CanonicalName(reason=str(rejected))


def _host_of_url(value: str) -> str:
    url = value.strip(_C0_AND_SPACE).translate(_TAB_AND_NEWLINE)
    match = _SCHEME.match(url)
    if match is None:
        if not url.startswith("//"):
            raise _RejectionError("no_scheme")
        scheme, rest = "http", url
    else:
        scheme, rest = match[1].lower(), url[match.end() :]
    if scheme == "file":
        raise _RejectionError("file_url")
    special = scheme in _SPECIAL_SCHEMES
    if special:
        # Any number of slashes of either kind, none included, leads to the host of these schemes.
        rest = rest.lstrip("/\\")
    elif rest.startswith("//"):
        rest = rest[2:]
    else:
        raise _RejectionError("no_host")
    end = (_SPECIAL_AUTHORITY_END if special else _AUTHORITY_END).search(rest)
    authority = rest if end is None else rest[: end.start()]
    host, port = _split_port(authority.rpartition("@")[2])
    if host == "":
        raise _RejectionError("no_host")
    _check_port(port or "")
    if special:
        return _parse_host(host) if host.startswith("[") else _parse_domain(_percent_decode(host))
    return _opaque_host(host)


def _host_of_bare(value: str) -> str:
    if _NOT_BARE.search(value):
        raise _RejectionError("not_bare")
    host, port = _split_port(value.partition("/")[0])
    if _NOT_BARE_HOST.search(host):
        raise _RejectionError("bad_character")
    if host == "":
        raise _RejectionError("no_host")
    if port is not None:
        if port == "":
            raise _RejectionError("bad_port")
        _check_port(port)
    ascii_host = _to_ascii(host) if not host.startswith("[") else _parse_host(host)
    name = ascii_host.removesuffix(".")
    if "" in name.split("."):
        raise _RejectionError("empty_label" if name.strip(".") else "no_host")
    if ends_in_number(name) and not is_dotted_ipv4(name):
        raise _RejectionError("bad_ipv4")
    return name


def _opaque_host(host: str) -> str:
    """Deviation 3. Addresses in brackets mean the same under every scheme."""
    try:
        canonical = _parse_host(host)
    except _RejectionError as rejected:
        raise _RejectionError("opaque_host") from rejected
    if canonical != host and not host.startswith("["):
        raise _RejectionError("opaque_host")
    return canonical


def _split_port(text: str) -> tuple[str, str | None]:
    """Host and port at the first colon outside brackets; the port is None without a colon."""
    if "[" in text and not text.startswith("["):
        raise _RejectionError("bad_character")
    start = text.find("]") + 1 if text.startswith("[") else 0
    if text.startswith("[") and start == 0:
        raise _RejectionError("bad_ipv6")
    host, colon, port = text[start:].partition(":")
    return text[:start] + host, port if colon else None


def _check_port(port: str) -> None:
    digits = port.lstrip("0")
    if port and not (port.isascii() and port.isdigit()):
        raise _RejectionError("bad_port")
    if len(digits) > 5 or (digits and int(digits) > 65535):
        raise _RejectionError("bad_port")


def _percent_decode(host: str) -> str:
    if "%" not in host:
        return host
    # Lone surrogates cannot be encoded; the standard reads them as U+FFFD, and so does "?" here: both fail.
    return unquote_to_bytes(host.encode("utf-8", "replace")).decode("utf-8", "replace")


def _parse_host(host: str) -> str:
    """The standard's host parser for special schemes, but for percent-decoding."""
    if not host.startswith("["):
        return _parse_domain(host)
    address = read_ipv6(host[1:-1]) if host.endswith("]") else None
    if address is None:
        raise _RejectionError("bad_ipv6")
    return f"[{address}]"


def _parse_domain(host: str) -> str:
    name = _to_ascii(host)
    if not ends_in_number(name):
        return name
    address = read_ipv4(name)
    if address is None:
        raise _RejectionError("bad_ipv4")
    return address


def _to_ascii(host: str) -> str:
    if len(host) > MAX_INPUT_CHARACTERS:
        raise _RejectionError("too_long")
    name = domain_to_ascii(host)
    if name is None:
        raise _RejectionError("bad_idna")
    if name == "":
        raise _RejectionError("no_host")
    if _FORBIDDEN_IN_DOMAIN.search(name):
        raise _RejectionError("bad_character")
    return name


def _within_dns_limits(host: str) -> str:
    if host.startswith("["):
        return host
    name = host.removesuffix(".")
    if name.strip(".") == "":
        raise _RejectionError("no_host")
    if len(name) > MAX_NAME_CHARACTERS or max(map(len, name.split("."))) > MAX_LABEL_CHARACTERS:
        raise _RejectionError("too_long")
    return name
