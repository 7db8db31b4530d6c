"""Work files of the grouping, and how its parts exchange arrays."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.paths import Gathering
from sparkrank.kernels.belonging import StrongLinks
from sparkrank.kernels.components import Ends
from sparkrank.places import Place


def strong_links_file(gathering: Gathering, group: int) -> Place:
    """Strong links of one group of targets, as its task left them; numbers count through all targets."""
    return gathering.folder.place.child("groups", "strong", f"{group:05d}.arrays")


def write_strong_links(gathering: Gathering, group: int, first_target: int, links: StrongLinks) -> int:
    """Writes the strong links of targets that count from ``first_target``; returns their number."""
    arrays = {**links._asdict(), "target": links.target + first_target}
    write_arrays(strong_links_file(gathering, group), arrays)
    return len(links.target)


@dataclass(frozen=True)
class GroupWork:
    """What every task of the grouping needs to know: it pickles small."""

    gathering: Gathering
    n_files: int
    """Files of strong links."""
    n_parts: int
    """Parts of sources and of candidates."""

    @property
    def _place(self) -> Place:
        return self.gathering.folder.place.child("groups")

    def homes(self, part: int) -> Place:
        """Sources that are no candidates, and their candidate; and links that hold candidates together."""
        return self._place.child("homes", f"{part:04d}.arrays")

    def shared(self, part: int) -> Place:
        """Sources that two candidates share, by the part of the first."""
        return self._place.child("shared", f"{part:04d}.arrays")

    def ends(self, turn: int, part: int) -> Place:
        """What a part knows of edges between candidates before a turn, by the part of the host."""
        return self._place.child("ends", f"{turn:03d}-{part:04d}.arrays")

    def edges(self, turn: int, part: int) -> Place:
        """What a large star made of them, by the part of the larger end."""
        return self._place.child("edges", f"{turn:03d}-{part:04d}.arrays")

    @property
    def described(self) -> Place:
        """Members with their groups, and what each group adds up to."""
        return self._place.child("described.arrays")

    @property
    def names(self) -> Place:
        """Names of the groups, as Parquet."""
        return self._place.child("names.parquet")

    def rows(self, stripe: int) -> Place:
        """Rows of ``farm_groups`` for the members of a stripe, as Parquet."""
        return self._place.child("rows", f"{stripe:03d}.parquet")

    @property
    def candidates(self) -> Place:
        """The candidates in groups and their groups' names, as Parquet."""
        return self._place.child("candidates.parquet")

    def links_of_file(self, file: int) -> StrongLinks:
        """The strong links of one file."""
        return StrongLinks(**read_arrays(strong_links_file(self.gathering, file)))

    def links_of_part(self, part: int) -> StrongLinks:
        """The strong links of the sources that fall to a part."""
        found = []
        for file in range(self.n_files):
            links = self.links_of_file(file)
            here = links.source % self.n_parts == part
            found.append([values[here] for values in links])
        return StrongLinks(*(np.concatenate(columns) for columns in zip(*found, strict=True)))

    def own_number(self, source: NDArray[np.int64]) -> NDArray[np.int64]:
        """The number of each source as a candidate; -1 where it is none."""
        hosts = self.gathering.targets.host
        place = np.minimum(np.searchsorted(hosts, source), len(hosts) - 1)
        return np.where(hosts[place] == source, place, -1)

    def write_ends(self, turn: int, part: int, ends: Ends) -> None:
        """Writes what a part knows of edges, for the parts of their hosts."""
        write_buckets(self.ends(turn, part), ends._asdict(), ends.host % self.n_parts, self.n_parts)


def write_buckets(
    place: Place, arrays: Mapping[str, NDArray[Any]], bucket: NDArray[np.int64], n_buckets: int
) -> None:
    """Writes arrays of one length sorted by bucket, in their order within each."""
    order = np.argsort(bucket, kind="stable")
    bounds = np.searchsorted(bucket[order], np.arange(n_buckets + 1))
    write_arrays(place, {**{name: values[order] for name, values in arrays.items()}, "bounds": bounds})


def read_bucket(places: list[Place], bucket: int) -> dict[str, NDArray[Any]]:
    """What several files have for one bucket, file after file; at least one file."""
    parts = []
    for place in places:
        found = read_arrays(place)
        first, end = found.pop("bounds")[bucket : bucket + 2].tolist()
        parts.append({name: values[first:end] for name, values in found.items()})
    return {name: np.concatenate([part[name] for part in parts]) for name in parts[0]}
