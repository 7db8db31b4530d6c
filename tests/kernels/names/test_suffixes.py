"""Suffix rules against the Public Suffix List's own vectors and the package that carries the list."""

import re
from pathlib import Path

import publicsuffixlist
import pyarrow as pa
import pytest
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.errors import ConfigError
from sparkrank.names import suffixes
from sparkrank.names.canonical import canonical_host
from sparkrank.names.suffixes import SuffixRules, split_hosts

PACKAGE = Path(publicsuffixlist.__file__).parent
RULES = SuffixRules.load()
VECTORS = re.findall(
    r"^checkPublicSuffix\('([^']+)', (?:null|'([^']*)')\);",
    (PACKAGE / "test_psl.txt").read_text(encoding="utf-8"),
    flags=re.MULTILINE,
)


def hosts_around_every_rule() -> list[str]:
    """The names of all rules of the list, and names of one to three labels more below each."""
    hosts = set()
    for line in (PACKAGE / "public_suffix_list.dat").read_text(encoding="utf-8").splitlines():
        if line and not line.startswith("//"):
            name = canonical_host(line.split()[0].lstrip("!").removeprefix("*.")).host
            assert name is not None
            hosts |= {name, f"w.{name}", f"v.w.{name}", f"u.v.w.{name}"}
    return sorted(hosts)


def test_official_vectors() -> None:
    assert len(VECTORS) > 70
    for host, domain in VECTORS:
        if host.startswith("."):
            continue  # the list's vectors say null of a leading dot; such a name is no canonical host
        canonical = canonical_host(host).host
        assert canonical is not None
        expected = canonical_host(domain).host if domain else None
        assert RULES.split(canonical)[1] == expected, host


@pytest.mark.parametrize("sections", ["icann+private", "icann"])
def test_agrees_with_the_package_on_every_rule(sections: str) -> None:
    oracle = publicsuffixlist.PublicSuffixList(only_icann=sections == "icann")
    rules = SuffixRules.load(sections)
    hosts = hosts_around_every_rule()
    assert len(hosts) > 30_000
    differing = [
        host for host in hosts if rules.split(host) != (oracle.publicsuffix(host), oracle.privatesuffix(host))
    ]
    assert differing == []


def test_sections_differ() -> None:
    # "github.io" is in the list's private section.
    assert RULES.split("a.b.github.io") == ("github.io", "b.github.io")
    assert SuffixRules.load("icann").split("a.b.github.io") == ("io", "github.io")


def test_extra_rules() -> None:
    extra = ["pages.example", "*.farm.example", "!www.farm.example", "Bücher.Example"]
    rules = SuffixRules.load("icann", extra)
    assert rules.split("a.b.pages.example") == ("pages.example", "b.pages.example")
    assert rules.split("a.b.c.farm.example") == ("c.farm.example", "b.c.farm.example")
    assert rules.split("a.www.farm.example") == ("farm.example", "www.farm.example")
    assert rules.split("a.xn--bcher-kva.example") == ("xn--bcher-kva.example", "a.xn--bcher-kva.example")
    # The official reading of the same rules by the package.
    oracle = publicsuffixlist.PublicSuffixList("\n".join(extra))
    for host in ["farm.example", "x.farm.example", "y.x.farm.example", "www.farm.example", "pages.example"]:
        assert rules.split(host) == (oracle.publicsuffix(host), oracle.privatesuffix(host))


@pytest.mark.parametrize(
    "rule", ["", "*", "*.", "!", "a.*.example", "a b", "192.0.2.1", "[::1]", "a..b", "a/b", "a:80", "!!a.b"]
)
def test_an_extra_rule_that_cannot_be_used_is_named(rule: str) -> None:
    with pytest.raises(ConfigError) as refused:
        SuffixRules.load("icann", ["pages.example", rule])
    assert str(refused.value) == (
        "names.extra_suffixes[1]: expected a public suffix rule such as 'pages.example', '*.example' or "
        f"'!www.example', found {rule!r}; correct or remove it"
    )


def test_an_exception_needs_two_labels() -> None:
    with pytest.raises(ConfigError, match=re.escape("names.extra_suffixes[0]: expected an exception of two")):
        SuffixRules.load("icann", ["!example"])


@pytest.mark.parametrize("host", ["192.0.2.1", "[2001:db8::1]", "a..example", "a.example.", ".example"])
def test_addresses_and_empty_labels_have_neither(host: str) -> None:
    assert RULES.split(host) == (None, None)


def test_fingerprint_follows_the_rules() -> None:
    base = SuffixRules.load("icann", ["a.example", "b.example"]).fingerprint
    assert base == SuffixRules.load("icann", ["b.example", "a.example", "com"]).fingerprint
    assert base != SuffixRules.load("icann", ["a.example"]).fingerprint
    assert base != SuffixRules.load("icann", ["a.example", "*.b.example"]).fingerprint
    assert base != SuffixRules.load("icann+private", ["a.example", "b.example"]).fingerprint


EXTRA = ("pages.example", "*.farm.example", "!www.farm.example", "a.b.c.d.deep.example", "*.wild")
RULE_SETS = [
    SuffixRules.load("icann+private", EXTRA),
    SuffixRules.of_rules([]),
    SuffixRules.of_rules(["test"]),
    SuffixRules.of_rules(["*.test", "a.test"]),
    SuffixRules.of_rules(["b.c.test"]),
]
ODD_HOSTS = [
    "", ".", "..", "...", ".test", "test.", "a..test", "a.b..", "192.0.2.1", "1.1.1.1", "255.255.255.255",
    "[2001:db8::1]", "[::c000:201]", "localhost", "a", "1.2.example", "a.7x7", "a.x7", "shop.1a", "a-.-b",
]  # fmt: skip


def check_split(hosts: list[str | None], rules: SuffixRules) -> None:
    found = split_hosts(pa.array(hosts, pa.string()), rules)
    for column in found:
        column.validate(full=True)
        assert column.type == pa.string()
    expected = [(None, None) if host is None else rules.split(host) for host in hosts]
    assert list(zip(*(column.to_pylist() for column in found), strict=True)) == expected


@pytest.mark.parametrize("rules", RULE_SETS)
def test_split_of_many_hosts_are_those_of_each(rules: SuffixRules, monkeypatch: pytest.MonkeyPatch) -> None:
    around_extra = [
        f"{head}{rule.strip('!*.')}"
        for rule in EXTRA
        for head in ("", "w.", "v.w.", "u.v.w.", "www.", "x.www.")
    ]
    hosts = [*ODD_HOSTS, None, *around_extra, *hosts_around_every_rule(), None, *ODD_HOSTS]
    check_split(hosts, rules)
    monkeypatch.setattr(suffixes, "_HOSTS_A_PASS", 1_000)
    check_split(hosts, rules)
    sliced = pa.array(hosts, pa.string()).slice(5, 50)
    assert (
        split_hosts(sliced, rules).domains.to_pylist()
        == (split_hosts(pa.array(hosts), rules).domains.to_pylist()[5:55])
    )
    monkeypatch.setattr(suffixes, "_HOSTS_A_PASS", 1)
    check_split(hosts[:100], rules)


@given(
    st.lists(
        st.one_of(
            st.none(),
            st.sampled_from(ODD_HOSTS),
            st.lists(
                st.sampled_from(["", "a", "b", "c", "test", "wild", "www", "farm", "example", "7x"]),
                max_size=7,
            ).map(".".join),
        ),
        max_size=30,
    ),
    st.sampled_from(RULE_SETS),
)
def test_split_of_made_hosts(hosts: list[str | None], rules: SuffixRules) -> None:
    check_split(hosts, rules)


def test_split_of_no_hosts() -> None:
    for length in (0, 3):
        for column in split_hosts(pa.nulls(length, pa.string()), RULES):
            assert column.equals(pa.nulls(length, pa.string()))


def test_the_bytes_of_a_null_name_nothing() -> None:
    behind = pa.array(["a.shop.example", "b.shop.example"]).buffers()[1:]
    hidden = pa.Array.from_buffers(pa.string(), 2, [pa.py_buffer(b"\x02"), *behind])
    assert split_hosts(hidden, RULES).domains.to_pylist() == [None, "shop.example"]
