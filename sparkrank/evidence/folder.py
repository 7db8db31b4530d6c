"""Names of the work files of one gathering of evidence.  All are removed when its tables are published."""

from __future__ import annotations

from dataclasses import dataclass

from sparkrank.places import Place


@dataclass(frozen=True, kw_only=True)
class EvidenceFolder:
    """The folder of one run's evidence."""

    place: Place

    def scanned(self, piece: int) -> Place:
        """Scores of one file of `host_scores`, by stripe."""
        return self.place.child("scan", f"{piece:05d}.arrays")

    def core_list(self) -> Place:
        """Ids and weights of the listed core members."""
        return self.place.child("core.arrays")

    def values(self, stripe: int) -> Place:
        """Scores of the stripe's hosts in the order of their ids."""
        return self.place.child("values", f"{stripe:03d}.arrays")

    def targets(self, stripe: int) -> Place:
        """The stripe's hosts for which evidence is gathered."""
        return self.place.child("targets", f"{stripe:03d}.arrays")

    def target_names(self, stripe: int) -> Place:
        """Their names, as Parquet."""
        return self.place.child("targets", f"{stripe:03d}.parquet")

    def sent(self, step: int, stripe: int, chunk: int) -> Place:
        """What a stripe's hosts send back along their in-links in a step, by source stripe."""
        return self.place.child("sent", f"{step:03d}", f"{stripe:03d}-{chunk:04d}.arrays")

    def residuals(self, step: int, stripe: int, chunk: int) -> Place:
        """What reaches the targets from the stripe's hosts over paths of so many links."""
        return self.place.child("residuals", f"{step:03d}", f"{stripe:03d}-{chunk:04d}.arrays")

    def lost(self, step: int, stripe: int) -> Place:
        """By target: what lies behind hosts of the stripe that were not followed."""
        return self.place.child("lost", f"{step:03d}-{stripe:03d}.arrays")

    def sources(self, kind: str, stripe: int, chunk: int) -> Place:
        """The stripe's sources of the targets, with what is known of them; sorted by target."""
        return self.place.child(kind, f"{stripe:03d}-{chunk:04d}.arrays")

    def handed_on(self, stripe: int) -> Place:
        """What the stripe's targets hand on to other targets."""
        return self.place.child("handed_on", f"{stripe:03d}.arrays")

    def leading(self, kind: str, group: int, stripe: int) -> Place:
        """The stripe's leading sources of a group's targets, as Parquet."""
        return self.place.child("leading", kind, f"{group:05d}-{stripe:03d}.parquet")

    def attributes(self) -> Place:
        """The folder of what the hosts input says of targets and listed sources."""
        return self.place.child("attributes")

    def support(self, group: int) -> Place:
        """Rows of `candidate_support` for a group of targets, as Parquet."""
        return self.place.child("support", f"{group:05d}.parquet")

    def measures(self, group: int) -> Place:
        """One row a target: what its support adds up to, as Parquet."""
        return self.place.child("measures", f"{group:05d}.parquet")

    def candidate_rows(self, number: int) -> Place:
        """Rows of `spam_candidates` from one file of `host_scores`, without ranks, as Parquet."""
        return self.place.child("candidates", f"{number:05d}.parquet")
