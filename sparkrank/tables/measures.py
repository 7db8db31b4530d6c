"""What a candidate's support adds up to: the evidence columns of ``spam_candidates``."""

from sparkrank.tables.spec import ColumnSpec, ColumnType

_IN_LINKS = "share of what in-links carry"
_OWN = "share of the host's own PageRank"
_SCALED = "scaled PageRank"
_DOUBLE, _LONG = ColumnType.DOUBLE, ColumnType.LONG


def _column(
    name: str,
    unit: str,
    meaning: str,
    *,
    caution: str | None = None,
    nullable: bool = False,
    type: ColumnType = _DOUBLE,
) -> ColumnSpec:
    return ColumnSpec(name=name, type=type, unit=unit, meaning=meaning, nullable=nullable, caution=caution)


SUPPORT_MEASURES = (
    _column(
        "bound_share",
        _IN_LINKS,
        "What comes from hosts whose walks lead here, less what those have from elsewhere.",
        caution="A small honest site's sources can look the same.",
    ),
    _column("bound_amount", _SCALED, "The same as an amount."),
    _column(
        "bound_sources",
        "hosts",
        "Direct sources whose walks lead here and that nobody else supports; parts of hosts add up.",
    ),
    _column(
        "independent_breadth",
        "hosts",
        "Direct sources with a standing of their own; parts of hosts add up, a link among many counts less.",
    ),
    _column("source_variety", "probability", "That two draws by contribution meet two different sources."),
    _column(
        "alike_sources",
        "probability",
        "That two draws by contribution meet sources of about as many out-links and in-links.",
        caution="Sites made from one template are alike, too.",
    ),
    _column("exclusive_share", _IN_LINKS, "Mean part of its own out-weight that a source gives here."),
    _column("returned_share", _IN_LINKS, "What comes from sources that the host links back to."),
    _column("circling_share", _IN_LINKS, "Mean part of a source's walks that arrive here on longer ways."),
    _column(
        "domain_concentration",
        "probability",
        "That two draws by contribution meet one registrable domain (Herfindahl index).",
    ),
    _column(
        "suffix_concentration",
        "probability",
        "That two draws by contribution meet one public suffix (Herfindahl index).",
    ),
    _column(
        "own_domain_share",
        _IN_LINKS,
        "What comes from the host's own registrable domain.",
        caution="A platform's users may share its domain and nothing else.",
    ),
    _column(
        "handed_on_share",
        "share of the host's out-weight",
        "What it gives to clearly higher candidates that owe it a hundredth of theirs or more.",
    ),
    _column("unsupported_share", _IN_LINKS, "Mean part of a source's standing that nobody else supports."),
    _column("mutual_target_share", _IN_LINKS, "What comes from sources that link to another candidate, too."),
    _column(
        "close_share",
        _IN_LINKS,
        "What comes from close sources: a fifth of their walks come here, or they share the domain, and "
        "others give them less than the 1 that every host has.",
        caution="Close says nothing of an owner.",
    ),
    _column(
        "open_page_share",
        _IN_LINKS,
        "What comes from pages that may be open to anyone: not close, linked from elsewhere, ten out-links "
        "or more, another domain, no link back.",
    ),
    _column("independent_share", _IN_LINKS, "What comes from all other sources."),
    _column("outside_feed", _SCALED, "What sources that are not close contribute."),
    _column("close_sources", "hosts", "Direct sources that are close.", type=_LONG),
    _column(
        "optimal_boosters",
        "hosts",
        "Back-linked boosters of a single farm that would do as much without the outside feed. "
        "Null where no farm is needed.",
        nullable=True,
    ),
    _column("share_within_1", _OWN, "What starts at hosts at most one link away, the host among them."),
    _column("share_within_2", _OWN, "What starts at hosts at most two links away."),
    _column("share_within_3", _OWN, "What starts at hosts at most three links away."),
    _column(
        "long_path_share",
        _OWN,
        "What arrives over paths of more than three links, or was not followed (truncated PageRank).",
    ),
    _column("supporters_at_1", "hosts", "Hosts that link here.", type=_LONG),
    _column("supporters_at_2", "hosts", "Hosts two links away, as far as followed.", type=_LONG),
    _column("supporters_at_3", "hosts", "Hosts three links away, as far as followed.", type=_LONG),
    _column(
        "supporter_growth",
        "ratio",
        "Least growth of the hosts within d links over those within d - 1, for d of 1 to 3.",
    ),
    _column(
        "largest_core_member_trust_share",
        "share of the host's own trust",
        "The largest part of its trust that comes from one core member, as far as followed. "
        "Null where it has none.",
        caution="Near 1, one abused link would explain all of its trust.",
        nullable=True,
    ),
    _column(
        "direct_unexplained_share",
        _OWN,
        "What in-links carry less what the direct sources in `candidate_support` do.",
    ),
    _column("origin_unexplained_share", _OWN, "What the origins in `candidate_support` leave."),
    _column(
        "origin_error_share",
        _OWN,
        "What lies behind hosts that were not followed back: no origin gives more than its contribution "
        "and this.",
    ),
)

MEASURES = tuple(column.name for column in SUPPORT_MEASURES)
"""The columns of a candidate that its support adds up to."""
