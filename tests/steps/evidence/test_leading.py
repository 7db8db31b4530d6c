"""The leading sources of each target against plain sorting."""

import numpy as np
from hypothesis import given
from hypothesis import strategies as st

from sparkrank.evidence.sources import leading_ones

# Few values, so that many are equal.
values = st.sampled_from([0.0, 0.25, 0.5, 1.0, 1e-300])


@given(st.lists(st.lists(values, min_size=1, max_size=12), max_size=6), st.integers(1, 5))
def test_leading_ones(contributions, most) -> None:
    target = np.repeat(np.arange(len(contributions)), [len(one) for one in contributions])
    flat = np.array([value for one in contributions for value in one])
    expected, first = [], 0
    for one in contributions:
        order = sorted(range(len(one)), key=lambda i: (-one[i], i))
        expected += [first + i for i in sorted(order[:most])]
        first += len(one)
    assert leading_ones(target.astype(np.uint32), flat, most).tolist() == expected
