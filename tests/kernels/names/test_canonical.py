"""Canonical hosts against the WHATWG URL vectors (tests/data/whatwg/SOURCE.md) and the bare-host rules."""

import json
import string
from pathlib import Path

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from sparkrank.names.canonical import REASONS, canonical_host

VECTORS = Path(__file__).parents[2] / "data" / "whatwg"
URLS = [vector for vector in json.loads((VECTORS / "urls.json").read_text()) if "//" in vector["input"]]
TO_ASCII = json.loads((VECTORS / "toascii.json").read_text())

# Input -> what we answer instead of the standard: a host, or a reason in angle brackets.
DEVIATIONS = {
    # A trailing dot is removed; names of nothing but dots are rejected.
    "http://./": "<no_host>",
    "http://../": "<no_host>",
    "h://.": "<no_host>",
    "http://foo.09..": "foo.09.",
    # file URLs name no host of the web.
    "file://spider///": "<file_url>",
    "file://example.net/C:/": "<file_url>",
    "file://1.2.3.4/C:/": "<file_url>",
    "file://[1::8]/C:/": "<file_url>",
    "file://a\u00adb/p": "<file_url>",
    "file://a%C2%ADb/p": "<file_url>",
    # Opaque hosts count only in canonical form.
    "sc://faß.ExAmPlE/": "<opaque_host>",
    "sc://ñ.test/": "<opaque_host>",
    "sc://ñ": "<opaque_host>",
    "sc://ñ?x": "<opaque_host>",
    "sc://ñ#x": "<opaque_host>",
    "sc://%/": "<opaque_host>",
    "asdf://%43%7C/": "<opaque_host>",
    "non-special://%E2%80%A0/": "<opaque_host>",
    "non-special://H%4fSt/path": "<opaque_host>",
    "foo://!\"$%&'()*+,-.;=_`{}~/": "<opaque_host>",
    "sc://" + "".join(map(chr, [*range(1, 9), 11, 12, *range(14, 32), 127])) + "!\"$%&'()*+,-.;=_`{}~/": (
        "<opaque_host>"
    ),
}


def answer(value: str | None) -> str:
    name = canonical_host(value)
    assert (name.host is None) != (name.reason is None)
    assert name.reason is None or name.reason in REASONS
    return name.host if name.host is not None else f"<{name.reason}>"


def test_every_url_vector_matches_or_is_a_listed_deviation() -> None:
    assert len(URLS) > 400
    found = {}
    for vector in URLS:
        # The standard's empty host names nobody: rejecting it is what the contract asks for.
        expected = vector.get("hostname") or None
        if canonical_host(vector["input"]).host != expected:
            found[vector["input"]] = answer(vector["input"])
    assert found == DEVIATIONS


def test_to_ascii_vectors_differ_only_where_dns_cannot_carry_the_name() -> None:
    for vector in TO_ASCII:
        expected = vector["output"]
        if expected and (len(expected) > 253 or max(map(len, expected.split("."))) > 63):
            expected = "<too_long>"
        got = answer(f"https://{vector['input']}/x")
        assert got == expected or (expected is None and got.startswith("<")), vector["input"]


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        ("Shop.Example", "shop.example"),
        ("shop.example.", "shop.example"),
        ("shop.example..", "<empty_label>"),
        ("shop.example:8080", "shop.example"),
        ("shop.example:8080/a/b", "shop.example"),
        ("shop.example/@user%20x", "shop.example"),
        ("shop.example/a//b", "<no_scheme>"),
        ("shop.example:", "<bad_port>"),
        ("shop.example:65536", "<bad_port>"),
        ("shop.example:000065535", "shop.example"),
        ("shop.example:٣", "<bad_port>"),
        ("http:/shop.example", "<bad_port>"),
        ("user@shop.example", "<bad_character>"),
        ("shop\\.example", "<bad_character>"),
        ("sh%6Fp.example", "<bad_character>"),
        ("sh op.example", "<not_bare>"),
        (" shop.example", "<not_bare>"),
        ("shop.example\n", "<not_bare>"),
        ("shop.example?q", "<not_bare>"),
        ("shop.example/p#f", "<not_bare>"),
        ("shop\u3000.example", "<bad_character>"),
        ("a..example", "<empty_label>"),
        (".example", "<empty_label>"),
        ("a。。example", "<empty_label>"),
        (".", "<no_host>"),
        ("/path", "<no_host>"),
        (":80", "<no_host>"),
        ("192.0.2.1", "192.0.2.1"),
        ("192.0.2.1.:80", "192.0.2.1"),
        ("１92.0.2.1", "192.0.2.1"),
        ("192.0.2.01", "<bad_ipv4>"),
        ("192.0.2.256", "<bad_ipv4>"),
        ("192.0.513", "<bad_ipv4>"),
        ("3221225985", "<bad_ipv4>"),
        ("0xC0.0.2.1", "<bad_ipv4>"),
        ("shop.0x1f", "<bad_ipv4>"),
        ("shop.7", "<bad_ipv4>"),
        ("[2001:DB8::0:1]:80/x", "[2001:db8::1]"),
        ("2001:db8::1", "<bad_port>"),
        ("[2001:db8", "<bad_ipv6>"),
        ("a[::1]", "<bad_character>"),
        ("a_b.r3---x.example", "a_b.r3---x.example"),
        ("bücher.example", "xn--bcher-kva.example"),
        ("BÜCHER.example", "xn--bcher-kva.example"),
        ("XN--BCHER-KVA.example", "xn--bcher-kva.example"),
        ("xn--bcher-kva-.example", "<bad_idna>"),
        ("faß.example", "xn--fa-hia.example"),
        ("", "<empty>"),
        (None, "<null>"),
    ],
)
def test_bare_hosts(value: str | None, expected: str) -> None:
    assert answer(value) == expected


@pytest.mark.parametrize(
    ("value", "expected"),
    [
        ("//Shop.Example/x", "shop.example"),
        ("///shop.example/x", "shop.example"),
        ("http:shop.example//x", "shop.example"),
        ("https://user:p@ss@shop.example:/", "shop.example"),
        ("https://shop.example\\@other.example/", "shop.example"),
        ("http://a..example/", "a..example"),
        ("http://[2001:db8:0:0:1:0:0:1]/", "[2001:db8::1:0:0:1]"),
        ("http://[::ffff:192.0.2.1]/", "[::ffff:c000:201]"),
        ("http://[1:2:3:4::5:6:7:8]/", "<bad_ipv6>"),
        ("http://[1:2:3:4:5:6:7::]/", "[1:2:3:4:5:6:7:0]"),
        ("http://%5B%3A%3A1%5D/", "<bad_character>"),
        ("http://0300.0x2.513/", "192.2.2.1"),
        ("http://shop.example:99999999999999999999/", "<bad_port>"),
        ("http://shop.example:00000000000080/", "shop.example"),
        ("gemini://shop.example/", "shop.example"),
        ("gemini://shop.example./", "shop.example"),
        ("gemini://Shop.example/", "<opaque_host>"),
        ("mailto:a@shop.example//x", "<no_host>"),
        ("1http://shop.example", "<no_scheme>"),
        ("http://" + "9" * 1000 + "/", "<bad_ipv4>"),
        ("http://\ud800.example/", "<bad_idna>"),
        ("http://%\ud800.example/", "<bad_character>"),
    ],
)
def test_urls(value: str, expected: str) -> None:
    # The canonical forms of the addresses follow RFC 5952, section 4, and the standard's IPv4 parser.
    assert answer(value) == expected


def test_limits_of_dns() -> None:
    label = "a" * 63
    name = ".".join([label, label, label, "a" * 61])
    assert len(name) == 253
    assert answer(name) == name
    assert answer(f"http://{name}./") == name
    assert answer(name + "a") == "<too_long>"
    assert answer("a" * 64 + ".example") == "<too_long>"
    assert answer("ü" * 1025) == "<too_long>"


def test_huge_values_are_read_without_trouble() -> None:
    assert answer("http://shop.example/" + "a" * 10_000_000) == "shop.example"
    assert answer("http://" + "u" * 10_000_000 + "@shop.example/") == "shop.example"
    assert answer("a" * 10_000_000) == "<too_long>"
    assert answer("a." * 5_000_000) == "<too_long>"
    assert answer("[" + ":" * 10_000_000 + "]") == "<bad_ipv6>"


hostish = st.text(
    st.sampled_from(string.ascii_letters + string.digits + "-_.:/@%[]\\?# \tüß‍。１א"), max_size=24
)


@settings(deadline=None)  # the first example loads the IDNA tables
@given(st.one_of(st.text(), hostish, hostish.map("http://".__add__), hostish.map("sc://".__add__)))
def test_a_canonical_host_names_itself(value: str) -> None:
    host = canonical_host(value).host
    if host is None:
        return
    assert host.isascii()
    assert host == host.lower()
    # Empty labels are only known to URLs.
    assert "" in host.split(".") or canonical_host(host).host == host
