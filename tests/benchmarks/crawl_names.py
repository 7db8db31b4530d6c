"""Names of the hosts of an invented crawl: everything about a host is computed from its id."""

import functools
import math

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc

# The same domain sizes are laid over every block of ids, so that no table grows with the graph.
_BLOCK_BITS = 16
_LARGEST_DOMAIN = 1 << 13
_DOMAIN_EXPONENT = 0.9  # of the tail P(size > s) = s^-exponent
_DIGITS = np.frombuffer(b"0123456789abcdefghijklmnopqrstuvwxyz", dtype=np.uint8)
_WORDS = ("blog", "shop", "news", "forum", "img", "mail", "static", "wiki", "dev", "cdn", "my", "en")

GROUPS = (
    "co.example",
    "org.example",
    "ac.example",
    "gov.example",
    "co.test",
    "org.test",
    "net.test",
)
"""Second-level groups that act as public suffixes; also the slices of the core."""


def scatter(ids: np.ndarray, bits: int) -> np.ndarray:
    """A fixed permutation of the ids 0 … 2^bits - 1: odd factors and shifts can be undone."""
    mask = (1 << bits) - 1
    for factor in (0x9E3779B1, 0x85EBCA6B, 0xC2B2AE35):
        ids = (ids * (factor & mask | 1)) & mask
        ids = ids ^ (ids >> (bits // 2))
    return ids


def mixed(values: np.ndarray, salt: int) -> np.ndarray:
    """64 well-mixed bits of each value: the finaliser of MurmurHash3 (from memory)."""
    bits = values.astype(np.uint64) + np.uint64((0x9E3779B97F4A7C15 * (salt + 1)) % 2**64)
    bits = (bits ^ (bits >> np.uint64(33))) * np.uint64(0xFF51AFD7ED558CCD)
    bits = (bits ^ (bits >> np.uint64(33))) * np.uint64(0xC4CEB9FE1A85EC53)
    return bits ^ (bits >> np.uint64(33))


class HostNames:
    """Domains of power-law size over the ids 0 … 2^id_bits - 1, and the names in them."""

    def __init__(self, id_bits: int, seed: int) -> None:
        self._seed = seed
        self._block_bits = min(_BLOCK_BITS, id_bits)
        random = np.random.Generator(np.random.SFC64(seed))
        n_offsets = 1 << self._block_bits
        draw = np.minimum(np.exp(random.exponential(1 / _DOMAIN_EXPONENT, n_offsets)), _LARGEST_DOMAIN)
        ends = np.cumsum(draw.astype(np.int64))
        ends = np.append(ends[ends < n_offsets], n_offsets)
        self._sizes = np.diff(ends, prepend=0)
        self._first = ends - self._sizes
        self._domain_of = np.repeat(np.arange(len(self._sizes)), self._sizes)
        self._n_domains = len(self._sizes) << (id_bits - self._block_bits)

    def domains(self, ids: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """First id and number of hosts of each id's domain."""
        offset, domain = self._in_block(ids)
        return ids - offset + self._first[domain], self._sizes[domain]

    def groups(self, ids: np.ndarray) -> np.ndarray:
        """Index into GROUPS of each id's domain."""
        return self._group_of(self._number(ids))

    def names(self, ids: np.ndarray) -> pa.Array:
        """Names such as `blog3.site-0k2fa.co.example`, no two alike."""
        offset, domain = self._in_block(ids)
        number = self._number(ids)
        labels = _labels(int(self._sizes.max())).take(pa.array(offset - self._first[domain]))
        endings = pa.array([f".{name}" for name in GROUPS]).take(pa.array(self._group_of(number)))
        return pc.binary_join_element_wise(labels, "site-", self._words(number), endings, "")

    def _in_block(self, ids: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        offset = ids & ((1 << self._block_bits) - 1)
        return offset, self._domain_of[offset]

    def _number(self, ids: np.ndarray) -> np.ndarray:
        """Number of each id's domain in the whole graph."""
        return (ids >> self._block_bits) * len(self._sizes) + self._in_block(ids)[1]

    def _group_of(self, number: np.ndarray) -> np.ndarray:
        return (mixed(number, self._seed + 1) % np.uint64(len(GROUPS))).astype(np.int64)

    def _words(self, number: np.ndarray) -> pa.Array:
        """The domains' numbers in base 36, scattered so that neighbours do not look alike."""
        bits = max(2, (self._n_domains - 1).bit_length())
        width = max(5, math.ceil(bits / math.log2(36)))
        number = scatter(number, bits)
        digits = np.empty((len(number), width), dtype=np.uint8)
        for at in range(width - 1, -1, -1):
            number, digit = np.divmod(number, 36)
            digits[:, at] = _DIGITS[digit]
        offsets = np.arange(len(digits) + 1, dtype=np.int32) * width
        return pa.StringArray.from_buffers(len(digits), pa.py_buffer(offsets), pa.py_buffer(digits))


@functools.lru_cache(maxsize=1)
def _labels(n_places: int) -> pa.Array:
    """The part of a name before its domain, with the dot, by the host's place in the domain."""
    labels = ["", "www."]
    for place in range(n_places - 2):
        number, word = divmod(place, len(_WORDS))
        labels.append(f"{_WORDS[word]}{number or ''}.")
    return pa.array(labels)
