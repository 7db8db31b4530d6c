"""Groups of candidates and the homes of their sources → members, and what each group adds up to."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
import pyarrow as pa
import pyarrow.compute as pc
import pyarrow.parquet as pq
from numpy.typing import NDArray

from sparkrank.arrays import read_arrays, write_arrays
from sparkrank.evidence.group_work import GroupWork
from sparkrank.evidence.values import host_names
from sparkrank.kernels.belonging import LEAST_OWED, LEAST_STRONG, StrongLinks
from sparkrank.kernels.components import Edges, labels
from sparkrank.kernels.group_shapes import SHAPE_NAMES, GroupSums, hands_over, shapes
from sparkrank.places import Place
from sparkrank.tables.groups import FARM_GROUPS
from sparkrank.tables.spec import arrow_schema

LEAST_HOSTS = 3
"""A candidate and one source are judged on their own rows."""

TARGET, BOOSTER, BOTH = 0, 1, 2
ROLE_NAMES = ("target", "booster", "both")
"""Words of the roles, by number."""


class Members(NamedTuple):
    """Hosts in groups by rising number; shapes (m,)."""

    host: NDArray[np.int64]
    group: NDArray[np.int64]
    """Number of the group: at first its least candidate, then counted from 0."""
    own: NDArray[np.int64]
    """Number as a candidate, -1 for others."""
    links: NDArray[np.int64]
    """Strong links of others, 0 for candidates."""


_OF_ALL = ("given", "returned", "started", "inherited")


class _Inside:
    """Adds up strong links inside groups; ``group`` is that of each member, below ``n_groups``."""

    def __init__(self, work: GroupWork, members: Members, n_groups: int) -> None:
        self._work, self._members, self._n = work, members, n_groups
        n_targets = work.gathering.n_targets
        self.sums = {name: np.zeros(n_groups) for name in (*_OF_ALL, "given_to_one", "circling")}
        self.supports = np.zeros(n_targets, dtype=np.bool_)
        """Candidates that are strong sources of others of their group; that hand on to higher ones."""
        self.hands_on = np.zeros(n_targets, dtype=np.bool_)
        self._group_of_target = np.full(n_targets, -1, dtype=np.int64)
        own = members.own >= 0
        self._group_of_target[members.own[own]] = members.group[own]

    def add(self, links: StrongLinks) -> None:
        """Takes the links of one file."""
        place = np.searchsorted(self._members.host, links.source)
        place = np.minimum(place, len(self._members.host) - 1)
        known = self._members.host[place] == links.source
        group = self._group_of_target[links.target]
        at = np.flatnonzero(known & (group >= 0) & (self._members.group[place] == group))
        for name in _OF_ALL:
            self._add(name, group[at], getattr(links, name)[at])
        alone = at[self._members.links[place[at]] == 1]
        self._add("given_to_one", group[alone], links.given[alone])
        self._add("circling", group[alone], links.circling[alone])
        own = self._members.own[place[at]]
        between = (own >= 0) & (links.of_all[at] >= LEAST_OWED)
        own, to = own[between], links.target[at][between]
        score = self._work.gathering.targets.score
        self.supports[own] = True
        self.hands_on[own[hands_over(score[own], score[to])]] = True

    def keep(self, groups: NDArray[np.bool_]) -> None:
        """Leaves out the sums of other groups."""
        self.sums = {name: sums[groups] for name, sums in self.sums.items()}

    def _add(self, name: str, group: NDArray[np.int64], values: NDArray[np.float64]) -> None:
        self.sums[name] += np.bincount(group, values, minlength=self._n)


@dataclass(frozen=True)
class Describe:
    """All groups, in one task: their numbers grow with the candidates and their direct sources alone.

    ``turn`` is the one before which the edges between candidates were stars.
    """

    work: GroupWork
    turn: int

    def __call__(self, _: int) -> int:
        """The number of groups."""
        members, n_groups = self._members()
        if n_groups == 0:
            return 0
        inside = _Inside(self.work, members, n_groups)
        for file in range(self.work.n_files):
            inside.add(self.work.links_of_file(file))
        members, explained = self._explained(members, inside)
        n_groups = len(explained)
        if n_groups == 0:
            return 0
        mass, domain = self._values(members)
        role = np.full(len(members.host), BOOSTER, dtype=np.int8)
        own = np.flatnonzero(members.own >= 0)
        role[own] = np.where(inside.supports[members.own[own]], BOTH, TARGET)
        self._write_names(members, own, mass)
        write_arrays(
            self.work.described,
            {
                "host": members.host,
                "group": members.group,
                "role": role,
                "explained_share": explained,
                **self._columns(members, own, inside, mass, domain, n_groups),
            },
        )
        return n_groups

    def _members(self) -> tuple[Members, int]:
        """Members of the groups that are large enough, which are counted from 0."""
        work = self.work
        parts = range(work.n_parts)
        ends = [read_arrays(work.ends(self.turn, part)) for part in parts]
        host = np.concatenate([one["host"] for one in ends])
        neighbour = np.concatenate([one["neighbour"] for one in ends])
        at = neighbour < host
        targets = work.gathering.targets.host
        least = labels(len(targets), Edges(host[at], neighbour[at]))
        homes = [read_arrays(work.homes(part)) for part in parts]
        home = np.concatenate([one["home"] for one in homes])
        leaves = np.concatenate([one["source"] for one in homes])
        joined = Members(
            host=np.concatenate((targets, leaves)),
            group=np.concatenate((least, least[home])),
            own=np.concatenate((np.arange(len(targets)), np.full(len(leaves), -1))),
            links=np.concatenate((np.zeros(len(targets), np.int64), *(one["links"] for one in homes))),
        )
        enough = np.bincount(joined.group, minlength=len(targets)) >= LEAST_HOSTS
        kept = np.flatnonzero(enough[joined.group])
        kept = kept[np.argsort(joined.host[kept])]
        number = np.cumsum(enough) - 1
        members = Members(*(values[kept] for values in joined))
        members = members._replace(group=number[members.group])
        return members, int(np.count_nonzero(enough))

    def _explained(self, members: Members, inside: _Inside) -> tuple[Members, NDArray[np.float64]]:
        """Members of the groups that explain enough, counted anew, and what these explain: (groups,).

        Shares are of what in-links carry to the candidates; ``inside`` is left with the same groups.
        """
        own = np.flatnonzero(members.own >= 0)
        score = self.work.gathering.targets.score[members.own[own]]
        given = inside.sums["given"]
        carried = np.bincount(members.group[own], score - 1.0, minlength=len(given))
        enough = given >= LEAST_STRONG * carried
        explained = np.minimum(1.0, given[enough] / carried[enough])
        inside.keep(enough)
        kept = enough[members.group]
        number = np.cumsum(enough) - 1
        members = Members(*(values[kept] for values in members))
        return members._replace(group=number[members.group]), explained

    def _values(self, members: Members) -> tuple[NDArray[np.float64], NDArray[np.int64]]:
        """Absolute mass and (a hash of) the domain of each member."""
        neighbours = self.work.gathering.neighbours
        cuts = np.searchsorted(members.host, neighbours.firsts)
        mass, domain = np.zeros(len(members.host)), np.zeros(len(members.host), dtype=np.int64)
        for stripe in range(len(cuts) - 1):
            first, end = int(cuts[stripe]), int(cuts[stripe + 1])
            if first < end:
                values = neighbours.values(stripe)
                here = members.host[first:end] - neighbours.firsts[stripe]
                mass[first:end] = values["absolute_mass"][here]
                domain[first:end] = values["domain"][here]
        return mass, domain

    def _columns(
        self,
        members: Members,
        own: NDArray[np.int64],
        inside: _Inside,
        mass: NDArray[np.float64],
        domain: NDArray[np.int64],
        n_groups: int,
    ) -> dict[str, NDArray[Any]]:
        """What each group adds up to, by names of the table's columns; shapes (groups,)."""
        group, numbers = members.group[own], members.own[own]
        hosts = np.bincount(members.group, minlength=n_groups)
        targets = np.bincount(group, minlength=n_groups)
        final = np.bincount(group[~inside.hands_on[numbers]], minlength=n_groups)
        domains, largest = _domains(members.group, domain, n_groups)
        return {
            "shape": shapes(GroupSums(candidates=targets, final=final, **inside.sums)),
            "hosts": hosts,
            "targets": targets,
            "boosters": hosts - targets,
            "domains": domains,
            "largest_domain_share": largest / hosts,
            "total_mass": np.bincount(members.group, mass, minlength=n_groups),
        }

    def _write_names(self, members: Members, own: NDArray[np.int64], mass: NDArray[np.float64]) -> None:
        """A group is named after its candidate of most absolute mass; ties go by name."""
        gathering = self.work.gathering
        found = []
        for stripe, count in enumerate(gathering.target_counts):
            if count:
                place = gathering.folder.target_names(stripe)
                column = pq.read_table(place.path, filesystem=place.filesystem)["host"]
                found.append(column.combine_chunks().cast(pa.string()))
        names = pa.concat_arrays(found).take(pa.array(members.own[own]))
        by_name = np.empty(len(names), dtype=np.int64)
        by_name[pc.array_sort_indices(names).to_numpy()] = np.arange(len(names))
        group = members.group[own]
        order = np.lexsort((by_name, -mass[own], group))
        heads = order[np.flatnonzero(np.diff(group[order], prepend=-1))]
        group_names = names.take(pa.array(heads))
        _write(self.work.names, pa.table({"group": group_names}))
        _write(
            self.work.candidates, pa.table({"host": names, "farm_group": group_names.take(pa.array(group))})
        )


def _domains(
    group: NDArray[np.int64], domain: NDArray[np.int64], n_groups: int
) -> tuple[NDArray[np.int64], NDArray[np.int64]]:
    """Different domains of each group, and members on its most frequent one."""
    order = np.lexsort((domain, group))
    group, domain = group[order], domain[order]
    is_first = np.ones(len(group), dtype=np.bool_)
    is_first[1:] = (group[1:] != group[:-1]) | (domain[1:] != domain[:-1])
    starts = np.flatnonzero(is_first)
    largest = np.zeros(n_groups, dtype=np.int64)
    np.maximum.at(largest, group[starts], np.diff(starts, append=len(group)))
    return np.bincount(group[starts], minlength=n_groups), largest


@dataclass(frozen=True)
class MemberRows:
    """Rows of the members of one stripe; returns their number."""

    work: GroupWork

    def __call__(self, stripe: int) -> int:
        work = self.work
        firsts = work.gathering.neighbours.firsts
        found = read_arrays(work.described)
        first, end = np.searchsorted(found["host"], firsts[stripe : stripe + 2]).tolist()
        if first == end:
            return 0
        group = found["group"][first:end]
        names = pq.read_table(work.names.path, filesystem=work.names.filesystem)["group"].combine_chunks()
        columns = {
            "group": names.take(pa.array(group)),
            "host": host_names(work.gathering.graph, stripe, found["host"][first:end] - firsts[stripe]),
            "role": np.array(ROLE_NAMES, dtype=object)[found["role"][first:end]],
            "shape": np.array(SHAPE_NAMES, dtype=object)[found["shape"][group]],
        }
        schema = arrow_schema(FARM_GROUPS)
        for name in schema.names:
            if name not in columns:
                columns[name] = found[name][group]
        arrays = [pa.array(columns[field.name]).cast(field.type) for field in schema]
        _write(work.rows(stripe), pa.table(arrays, schema=schema))
        return int(end - first)


def _write(place: Place, table: pa.Table) -> None:
    sink = pa.BufferOutputStream()
    pq.write_table(table, sink, compression="zstd")
    place.write_bytes(sink.getvalue())
