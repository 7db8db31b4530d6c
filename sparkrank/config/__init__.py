"""The configuration: what can be set, what it means, and how it is read and checked.

`settings` says what one setting is and checks a value, `sections` declares every setting with its default
and the reason for it, `load` reads a TOML file and `--set` overrides into a frozen `Config`.
"""

from sparkrank.config.load import load_config
from sparkrank.config.sections import (
    Candidates,
    Config,
    Evidence,
    Graph,
    Input,
    Mass,
    Names,
    Run,
    Solve,
    describe_config,
)

__all__ = [
    "Candidates",
    "Config",
    "Evidence",
    "Graph",
    "Input",
    "Mass",
    "Names",
    "Run",
    "Solve",
    "describe_config",
    "load_config",
]
