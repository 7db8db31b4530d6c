"""Last labels, against splitting each host."""

import numpy as np
from hypothesis import example, given
from hypothesis import strategies as st

from sparkrank.kernels.labels import LastLabels

NAME = st.lists(st.sampled_from(["a", "bb", "7", "77", "7a", "c-d", ""]), max_size=6).map(".".join)
HOST = st.one_of(NAME, st.sampled_from(["192.0.2.255", "1.1.1.1", "[::1]", "[2001:db8::1]", "localhost"]))


def expected_labels(host: str) -> int:
    labels = host.split(".")
    # What a canonical host with such an end is: an IPv4 address.
    number = labels[-1].isdigit() and len(labels[-1]) <= 3
    return 0 if host.startswith("[") or "" in labels or number else len(labels)


@given(st.lists(HOST, max_size=20), st.integers(0, 3))
@example([], 0)
@example([""], 0)
@example(["a.", ".b"], 0)
@example(["a", "b", "c"], 3)
def test_it_counts_and_finds_labels_as_splitting_does(hosts: list[str], skipped: int) -> None:
    data = np.frombuffer(("." * skipped + "".join(hosts) + "..").encode(), dtype=np.uint8)
    offsets = skipped + np.cumsum([0, *map(len, hosts)])
    labels = LastLabels(data, offsets)
    assert labels.n_labels.tolist() == [expected_labels(host) for host in hosts]
    for count in (1, 2, 3, 9):
        begin = labels.begin(count)
        ends = [data[b:e].tobytes().decode() for b, e in zip(begin, offsets[1:], strict=True)]
        assert ends == [".".join(host.split(".")[-count:]) for host in hosts]
    counts = np.arange(len(hosts)) % 4 + 1
    assert (
        labels.begin(counts) == [labels.begin(count)[at] for at, count in enumerate(counts.tolist())]
    ).all()
