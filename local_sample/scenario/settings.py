"""What a scenario is made from: seed, size, and which farms and honest look-alikes are planted."""

import math
import zlib
from dataclasses import dataclass

import numpy as np

FARM_SHAPES: tuple[str, ...] = (
    "one_way_star",
    "back_star",
    "ring",
    "alliance",
    "two_tier",
    "camouflage",
    "expired",
    "comment_fed",
    "abused_core",
)
LOOKALIKES: tuple[str, ...] = (
    "fishing_coop",
    "island_blogs",
    "platform",
    "footer_credit",
    "web_ring",
    "office_portal",
)
# Institutions that could be vetted make up about 4.5% of the hosts; a larger core could not be filled.
LARGEST_CORE_SHARE = 0.04


@dataclass(frozen=True, kw_only=True)
class Settings:
    """Everything that decides a scenario; equal settings give equal rows.

    Raises ValueError for a value that no scenario can be made from.
    """

    seed: int = 202611
    # 1 is about 20,000 hosts; hosts and number of farms grow in proportion.
    scale: float = 1.0
    # Core members divided by hosts. 2% keeps J (the weight of one core link) near 42 at every scale.
    core_share: float = 0.02
    # Farms of each shape at scale 1, of different sizes.
    farms_per_shape: int = 4
    farm_shapes: tuple[str, ...] = FARM_SHAPES
    lookalikes: tuple[str, ...] = LOOKALIKES

    def __post_init__(self) -> None:
        if self.seed < 0:
            raise ValueError(f"seed: expected 0 or more, found {self.seed}")
        if not (math.isfinite(self.scale) and self.scale >= 0.05):
            raise ValueError(f"scale: expected at least 0.05, found {self.scale}")
        if not 0 < self.core_share <= LARGEST_CORE_SHARE:
            raise ValueError(
                f"core_share: expected above 0 and at most {LARGEST_CORE_SHARE}, found {self.core_share}"
            )
        if self.farms_per_shape < 0:
            raise ValueError(f"farms_per_shape: expected 0 or more, found {self.farms_per_shape}")
        for field, chosen, known in (
            ("farm_shapes", self.farm_shapes, FARM_SHAPES),
            ("lookalikes", self.lookalikes, LOOKALIKES),
        ):
            unknown = sorted(set(chosen) - set(known))
            if unknown:
                raise ValueError(f"{field}: expected some of {', '.join(known)}, found {', '.join(unknown)}")

    def scaled(self, count: float, at_least: int = 1) -> int:
        """`count` at scale 1, carried over to this scale."""
        return max(at_least, round(count * self.scale))

    @property
    def largest_farm(self) -> int:
        """Boosters of the largest farm: 400, less on small webs, where one such farm would be everything."""
        return int(min(400, max(20, round(400 * self.scale))))

    def random(self, part: str) -> np.random.Generator:
        """The random stream of one part, its own, so that leaving a part out does not move the others."""
        return np.random.Generator(np.random.PCG64([self.seed, zlib.crc32(part.encode())]))
