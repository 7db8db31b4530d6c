"""Names decided many at a time against `canonical_host`: WHATWG vectors, made strings, hostile ones."""

import json
import string
import time
from collections.abc import Sequence
from pathlib import Path

import numpy as np
import pyarrow as pa
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from sparkrank.kernels import plain_hosts
from sparkrank.kernels.plain_hosts import find_plain_hosts
from sparkrank.names import native
from sparkrank.names.canonical import CanonicalName, canonical_host
from sparkrank.names.native import decide_names
from sparkrank.names.octets import octets_of

VECTORS = Path(__file__).parents[2] / "data" / "whatwg"
HUGE = 10_000_000
LABEL = "a" * 63
LONGEST = ".".join([LABEL, LABEL, LABEL, "a" * 61])

PLAIN = {
    "shop.example": "shop.example",
    "Shop.EXAMPLE": "shop.example",
    "shop.example.": "shop.example",
    "localhost": "localhost",
    "7-_.a7.x": "7-_.a7.x",
    "a_b.r3---x.4you.example:8080/p/@q%20": "a_b.r3---x.4you.example",
    "shop.example/\x80ü": "shop.example",
    "shop.example.:1/": "shop.example",
    "http://shop.example": "shop.example",
    "HTTPS://Shop.Example?q": "shop.example",
    "ftp://shop.example#f": "shop.example",
    "wss://shop.example./": "shop.example",
    "ws://shop.example:": "shop.example",
    "ws://shop.example:80?": "shop.example",
    "//shop.example\\x": "shop.example",
    "http://shop.example/\ud7ff\n//": "shop.example",
    LONGEST: LONGEST,
    LONGEST + ".": LONGEST,
    f"http://{LABEL}.example:5999/": f"{LABEL}.example",
    "http://shop.example/" + "x" * 4000: "shop.example",
}
ODD = [
    None, "", ".", "..", "a..b", ".a", "a..", "/", ":", "//", "://", "http://", "192.0.2.1", "shop.7",
    "shop.0x1f", "xn--bcher-kva.example", "a.XN--x.example", "bücher.example", "\u212aelvin.example",
    "shop.example\n", "shop.example ", " http://shop.example/", "http://u@shop.example/",
    "http://u:8@shop.example/", "http://shop.example:65536/", "http://shop.example:8a/",
    "http://shop.example:8.", "shop.example:", "shop.example:8:8", "shop.example/a//b", "shop.example//",
    "a b", "http://sh%6fp.example/", "file://shop.example/", "gemini://shop.example/", "http:/shop.example",
    "http:shop.example", "\x28ttp://shop.example", "h\x54tp:\x0f/a", "http://shop.example\n/",
    "http://shop.example:80\t/", "shop.example?q", "shop.example/p#f", "shop.example/\x7f",
    "http:///shop.example/", "http://.shop.example/", LONGEST + "a", LABEL + "a.example",
    "x." + LABEL + "a.example", "example." + LABEL + "a", f"http://{LONGEST}a/",
]  # fmt: skip
HUGE_VALUES = [
    "http://shop.example/" + "x" * HUGE, "http://" + "u" * HUGE + "@shop.example/", "a" * HUGE,
    "a." * (HUGE // 2), "a/" + "/" * HUGE, "http://" + "a." * (HUGE // 2), "ü" * HUGE,
]  # fmt: skip


def answers(values: Sequence[str | None]) -> list[CanonicalName]:
    decided = decide_names(pa.array(values, pa.string()))
    decided.hosts.validate(full=True)
    decided.reasons.validate(full=True)
    assert (decided.hosts.type, decided.reasons.type) == (pa.string(), pa.string())
    pairs = zip(decided.hosts.to_pylist(), decided.reasons.to_pylist(), strict=True)
    return [CanonicalName(host=host, reason=reason) for host, reason in pairs]


def plain_of(values: Sequence[str | None]) -> list[str]:
    """What the kernel alone finds; empty where it leaves a value to Python."""
    found = find_plain_hosts(*octets_of(pa.array(values, pa.string())))
    ends = np.cumsum(found.lengths).tolist()
    text = found.data.tobytes().decode("ascii")
    assert len(text) == (ends or [0])[-1]
    return [text[end - length : end] for end, length in zip(ends, found.lengths.tolist(), strict=True)]


def check(values: Sequence[str | None]) -> None:
    assert answers(values) == [canonical_host(value) for value in values]


def test_plain_values_are_found_and_odd_ones_are_left() -> None:
    assert dict(zip(PLAIN, plain_of(list(PLAIN)), strict=True)) == PLAIN
    assert [value for value, host in zip(ODD, plain_of(ODD), strict=True) if host] == []
    check([*PLAIN, *ODD])
    assert [canonical_host(value).host for value in PLAIN] == list(PLAIN.values())


@pytest.mark.parametrize("value", [*PLAIN, *ODD])
def test_alone_and_beside_others_a_value_names_the_same(value: str | None) -> None:
    expected = canonical_host(value)
    assert answers([value]) == [expected]
    for other in (
        "",
        "/",
        "//",
        ".",
        "-",
        "--",
        "xn--",
        "example",
        ":80",
        "/x",
        "//x",
        "@",
        "9",
        "http:",
        None,
    ):
        assert answers([other, value, other])[1] == expected, other


def test_what_follows_in_memory_leaves_a_value_plain() -> None:
    values = [
        "shop.example",
        ":80",
        "shop.example/",
        "//b.example",
        "http://c.example",
        "/",
        "d-",
        "-e",
        "xn",
        "--f",
    ]
    expected = ["shop.example", "", "shop.example", "b.example", "c.example", "", "d-", "-e"]
    assert plain_of(values)[:8] == expected


def _hostish() -> st.SearchStrategy[str]:
    letters = st.text(st.sampled_from(string.ascii_letters + string.digits + "-_"), max_size=6)
    odd = st.text(st.sampled_from("ab1.-_:/@%[]\\?# \t\n\x7f\u00ad‍ß．１\u212a"), max_size=4)
    label = st.one_of(letters, letters, st.sampled_from(["xn--", "0x1", "1", LABEL, "test", "example"]), odd)
    name = st.lists(label, max_size=5).map(".".join)
    before = st.sampled_from(["", "", "http://", "HTTPS://", "//", "wss://", "ftp:/", "file://", "x://", " "])
    after = st.sampled_from(
        ["", "", ".", "/", ":80", ":65536", ":60000/", ":/", "?q", "#", "/a//b", "\\", "\n"]
    )
    return st.tuples(before, name, after, odd).map("".join)


@settings(max_examples=150)
@given(st.lists(st.one_of(_hostish(), _hostish(), st.text(), st.none()), max_size=40))
@example([])
@example([""])
@example([None])
@example(["", "", "a", ""])
def test_made_strings(values: list[str | None]) -> None:
    check(values)


def test_vectors_and_their_cuts() -> None:
    vectors = json.loads((VECTORS / "urls.json").read_text())
    vectors += json.loads((VECTORS / "toascii.json").read_text())
    inputs = [vector["input"].encode("utf-8", "replace").decode() for vector in vectors]
    # Every tail of a vector, and padding around the limits, make new edge cases.
    values = {text[cut:] for text in inputs for cut in range(0, min(len(text), 30), 3)}
    values |= {f"{'p' * pad}.{text}" for text in inputs[:40] for pad in (50, 63, 64, 245, 253, 254)}
    values |= {
        f"http://{'p.' * pad}{end}" for pad in range(115, 128) for end in ("a", "aa", "a/", "aa:8/", "1/")
    }
    ordered = sorted(values)
    assert sum(map(bool, plain_of(ordered))) > 300
    check(ordered)


@pytest.mark.parametrize("one_kind", [True, False])
def test_how_values_share_blocks_makes_no_difference(monkeypatch: pytest.MonkeyPatch, one_kind: bool) -> None:
    values = [f"shop-{n}.example" for n in range(99)] if one_kind else [*PLAIN, *ODD, *PLAIN]
    for size in (1, 20, 300, 5_000):
        monkeypatch.setattr(plain_hosts, "_BLOCK_BYTES", size)
        check(values)
        monkeypatch.setattr(plain_hosts, "_MAX_VALUE_BYTES", 14)
        check(values)
        monkeypatch.undo()


@pytest.mark.parametrize("kind", [pa.string(), pa.large_string(), pa.binary(), pa.large_binary()])
def test_types_slices_and_chunks(kind: pa.DataType) -> None:
    values = [*PLAIN, None, *ODD]
    array = pa.array(values, pa.string()).cast(kind)
    whole = decide_names(array)
    sliced = decide_names(array[3:40])
    assert sliced.hosts.equals(whole.hosts[3:40])
    assert sliced.reasons.equals(whole.reasons[3:40])
    for cuts in ([], [array], [array[:7], array[7:7], array[7:]]):
        chunked = decide_names(pa.chunked_array(cuts, kind))
        assert chunked.hosts.equals(whole.hosts if cuts else pa.array([], pa.string()))
        assert chunked.reasons.equals(whole.reasons if cuts else pa.array([], pa.string()))


def test_other_types_are_refused() -> None:
    with pytest.raises(TypeError, match="names: expected an array of strings or bytes, found int64"):
        decide_names(pa.array([1]))


def test_a_null_may_have_bytes_of_its_own() -> None:
    bytes_behind = pa.array(["a.example", "b.example", "ü.example"]).buffers()[1:]
    hidden = pa.Array.from_buffers(pa.string(), 3, [pa.py_buffer(b"\x01"), *bytes_behind])
    decided = decide_names(hidden)
    assert decided.hosts.to_pylist() == ["a.example", None, None]
    assert decided.reasons.to_pylist() == [None, "null", "null"]


@pytest.mark.parametrize(
    ("octets", "host", "reason"),
    [
        (b"http://shop.example/\xff", "shop.example", None),
        (b"shop.example/\xff\xc3/x", "shop.example", None),
        (b"sh\xffop.example", None, "bad_idna"),
        (b"shop.example\xc3", None, "bad_idna"),
    ],
)
def test_bytes_that_are_not_utf8(octets: bytes, host: str | None, reason: str | None) -> None:
    assert canonical_host(octets.decode("utf-8", "replace")) == CanonicalName(host=host, reason=reason)
    decided = decide_names(pa.array([octets]))
    assert (decided.hosts.to_pylist(), decided.reasons.to_pylist()) == ([host], [reason])


def test_every_byte_at_every_place_of_a_value() -> None:
    values = []
    for text in (b"ab.cd", b"http://a.b:1/", b"a.b:1/c"):
        for at in range(len(text) + 1):
            values += [
                text[:at] + bytes([octet]) + text[at + kept :] for octet in range(256) for kept in (0, 1)
            ]
    decided = decide_names(pa.array(values, pa.binary()))
    for value, host, reason in zip(
        values, decided.hosts.to_pylist(), decided.reasons.to_pylist(), strict=True
    ):
        expected = canonical_host(value.decode("utf-8", "replace"))
        assert (host, reason) == (expected.host, expected.reason), value


def test_huge_values_cost_little(monkeypatch: pytest.MonkeyPatch) -> None:
    started = time.process_time()
    check(["a.example", *HUGE_VALUES, "http://b.example/"])
    # About 1 s, the expected answers included; any work that grows faster than the bytes takes minutes.
    assert time.process_time() - started < 20


def test_odd_values_are_decided_once_but_long_ones_are_not_kept(monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[str | None] = []

    def spy(value: str | None) -> CanonicalName:
        asked.append(value)
        return canonical_host(value)

    monkeypatch.setattr(native, "canonical_host", spy)
    native._remembered.cache_clear()
    values = ["bücher.example", "192.0.2.1", "ü" * 300]
    first, again = answers(values), answers(values)
    assert first == again == [canonical_host(value) for value in values]
    assert asked == [*values, "ü" * 300]
