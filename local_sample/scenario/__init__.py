"""An invented web: the Saltmere coast, its harbour towns and what links to them.

Every name is reserved (`.example`, `.test`, `localhost`, documentation addresses). The web is planted, so
the truth about every host is known; nothing in it says how common a shape is on a real web.

Data flow: `settings` -> `web` (hosts and links as they are planted) <- `honest` (institutions, businesses,
people) <- `lookalikes` (honest places that look like farms) <- `farms` -> `lists` (core, known spam) and
`rows` (spellings, duplicates, refused rows) -> `build.generate` -> `files` (Parquet, CSV).
"""

from scenario.build import Graph, Scenario, generate
from scenario.files import write_inputs
from scenario.settings import FARM_SHAPES, LOOKALIKES, Settings

__all__ = ["FARM_SHAPES", "LOOKALIKES", "Graph", "Scenario", "Settings", "generate", "write_inputs"]
