"""Writes the parts of README.md that the code declares: `python .ci/readme.py`.

A part stands between `<!-- NAME: made by .ci/readme.py -->` and `<!-- end of NAME -->`. The tests hold the
README against `with_parts`.
"""

import re
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank.config import describe_config
from sparkrank.config.sections import settings_of
from sparkrank.graph.rejected import BAD_LINKS
from sparkrank.kernels.farms import core_member_start
from sparkrank.kernels.floor import SHAPES, DetectionFloor, detection_floor
from sparkrank.names.canonical import REASONS
from sparkrank.names.lists import LIST_REASONS
from sparkrank.propagate.members import NOT_IN_GRAPH
from sparkrank.publish.outcome import STATUS_NAMES
from sparkrank.tables import reference_markdown

README = Path(__file__).resolve().parent.parent / "README.md"
NAMES = "every name"
LISTS = "`core.host`, `known_spam.host`"
FLOOR_GRAPHS = ((80_000, 1_000), (335_000_000, 5_000))
"""Hosts and core members for which the detection floor is shown: a small graph, and a thin core."""


def parts() -> dict[str, str]:
    """Each part's text by its name."""
    return {
        "configuration": f"```text\n{describe_config()}\n```",
        "tables": reference_markdown().strip(),
        "reasons": rejection_table(),
        "statuses": status_table(),
        "floor": floor_table(),
    }


def rejection_table() -> str:
    """Every reason for which an input value is set aside."""
    lines = ["| reason | where | meaning |", "|---|---|---|"]
    lines += [f"| `{code}` | {NAMES} | {text} |" for code, text in REASONS.items()]
    lines += [f"| `{code}` | {LISTS} | {text} |" for code, text in LIST_REASONS.items()]
    lines.append(f"| `{NOT_IN_GRAPH}` | {LISTS} | no accepted row and no host list names this host |")
    lines.append(f"| `{BAD_LINKS}` | `edges.links` | the number of links is null or not above 0 |")
    return "\n".join(lines)


def status_table() -> str:
    """Every exit status with its name in the outcome file."""
    lines = [f"| {code} | {text} |" for code, text in STATUS_NAMES.items()]
    return "\n".join(["| status | meaning |", "|---|---|", *lines])


def floor_table() -> str:
    """Boosters of the smallest farm that the default thresholds list, by shape."""
    floors = [(n, core, default_floor(n, core)) for n, core in FLOOR_GRAPHS]
    heads = ["no core link", *(f"one, {n:,} hosts, {core:,} core members" for n, core, _ in floors)]
    lines = [f"| shape | how boosters link | {' | '.join(heads)} |", f"|---|---|{'---:|' * len(heads)}"]
    for name, shape in SHAPES.items():
        found = [floor.shapes[name] for *_, floor in floors]
        sizes = [found[0].boosters, *(one.boosters_with_core_link for one in found)]
        shown = ["none" if size is None else f"{size:,}" for size in sizes]
        lines.append(f"| {name} | {shape.meaning} | {' | '.join(shown)} |")
    return "\n".join(lines)


def default_floor(n_hosts: int, n_core: int) -> DetectionFloor:
    """The detection floor of a graph and a core at the default settings."""
    sections = ("solve", "mass", "candidates")
    defaults = {key: default for section in sections for key, (_, default) in settings_of(section).items()}
    return detection_floor(
        min_scaled_pagerank=defaults["min_scaled_pagerank"],
        min_relative_mass=defaults["min_relative_mass"],
        damping=defaults["damping"],
        core_start=core_member_start(defaults["good_share"], n_hosts, n_core),
    )


def with_parts(readme: str) -> str:
    """The text with every part made anew; ValueError where a part has no place in it."""
    for name, text in parts().items():
        begin, end = f"<!-- {name}: made by .ci/readme.py -->\n", f"\n<!-- end of {name} -->"
        place = re.compile(f"{re.escape(begin)}.*?{re.escape(end)}", re.DOTALL)
        if len(place.findall(readme)) != 1:
            raise ValueError(f"README.md: expected one place for the part {name}")
        whole = f"{begin}{text}{end}"
        readme = place.sub(lambda _, whole=whole: whole, readme)
    return readme


if __name__ == "__main__":
    README.write_text(with_parts(README.read_text(encoding="utf-8")), encoding="utf-8")
