"""What became of the rows of the edge table."""

from __future__ import annotations

from typing import Any

from sparkrank.errors import InputRefused


def check_rejected_share(counts: dict[str, Any], allowed: float) -> None:
    """InputRefused where more than the allowed share of the edge rows was rejected."""
    rejected, rows = counts["rejected"], counts["rows"]
    n_rejected = sum(rejected.values())
    if n_rejected > allowed * rows:
        most = sorted(rejected.items(), key=lambda item: (-item[1], item[0]))[:3]
        reasons = ", ".join(f"{reason} {count:,}" for reason, count in most)
        raise InputRefused(
            f"input.edges: expected at most {allowed:.4g} of the rows to be rejected "
            f"(graph.max_rejected_share), found {n_rejected:,} of {rows:,} ({reasons}); "
            "mend the edge table or allow more"
        )


def add_counts(parts: list[dict[str, int]]) -> dict[str, int]:
    total: dict[str, int] = {}
    for part in parts:
        for name, count in part.items():
            total[name] = total.get(name, 0) + count
    return dict(sorted(total.items()))


def graph_counts(
    scan: dict[str, Any], hosts: dict[str, Any], tiles: dict[str, Any], order: dict[str, Any]
) -> dict[str, Any]:
    return {
        "rows": scan["rows"],
        "rejected_rows": sum(scan["rejected"].values()),
        "rejected": scan["rejected"],
        "rejected_hosts": scan["rejected_hosts"],
        "not_followed_rows": scan["not_followed"],
        "self_link_rows": scan["self_links"],
        "merged_rows": scan["edge_rows"] - tiles["edges"],
        "hosts": hosts["hosts"],
        "edges": tiles["edges"],
        "iterated_hosts": order["iterated"],
    }
