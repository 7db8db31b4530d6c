"""Writes the parts of README.md that the code declares: `python .ci/readme.py`.

A part stands between `<!-- NAME: made by .ci/readme.py -->` and `<!-- end of NAME -->`. The tests hold the
README against `with_parts`.
"""

import re
import sys
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent.parent))

from sparkrank.config import describe_config
from sparkrank.graph.rejected import BAD_LINKS
from sparkrank.names.canonical import REASONS
from sparkrank.names.lists import LIST_REASONS
from sparkrank.propagate.members import NOT_IN_GRAPH
from sparkrank.publish.outcome import STATUS_NAMES
from sparkrank.tables import reference_markdown

README = Path(__file__).resolve().parent.parent / "README.md"
NAMES = "every name"
LISTS = "`core.host`, `known_spam.host`"


def parts() -> dict[str, str]:
    """Each part's text by its name."""
    return {
        "configuration": f"```text\n{describe_config()}\n```",
        "tables": reference_markdown().strip(),
        "reasons": rejection_table(),
        "statuses": status_table(),
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
