"""Makes the bundled sample anew: `python local_sample/generate.py [--seed N] [--scale X]`."""

import argparse
from pathlib import Path

from scenario import Settings, generate, write_inputs


def main() -> None:
    """Write the input files and say how many rows they hold."""
    defaults = Settings()
    parser = argparse.ArgumentParser(description="Write the input files of an invented web.")
    parser.add_argument("--seed", type=int, default=defaults.seed)
    parser.add_argument("--scale", type=float, default=defaults.scale, help="1 is about 20,000 hosts")
    parser.add_argument("--output", type=Path, default=Path(__file__).parent / "input")
    arguments = parser.parse_args()
    try:
        settings = Settings(seed=arguments.seed, scale=arguments.scale)
    except ValueError as error:
        parser.error(str(error))
    scenario = generate(settings)
    write_inputs(scenario, arguments.output)
    print(
        f"{arguments.output}: {len(scenario.graph.hosts):,} hosts, {scenario.edges.num_rows:,} edge rows, "
        f"{scenario.core.num_rows} core entries, {scenario.known_spam.num_rows} known spam entries"
    )


if __name__ == "__main__":
    main()
