"""Chance that is the same on every machine: a small seeded generator whose whole state is one integer.

The mixing steps are those of the published public-domain generator "splitmix64" (G. Steele, D. Lea, C.
Flood, "Fast splittable pseudorandom number generators", 2014). Normal deviates are sums of twelve uniform
ones: no logarithm, so no library's last digit; their tails end at six sigma.
"""

from __future__ import annotations

import zlib
from functools import lru_cache
from math import log
from random import Random

_MASK = (1 << 64) - 1
_STEP = 0x9E3779B97F4A7C15
TABLE_SIZE = 8192


class Dice:
    """A stream of chance; `state` is all it keeps."""

    def __init__(self, seed: int, name: str) -> None:
        self.state = (seed * 0xD1342543DE82EF95 + zlib.crc32(name.encode())) & _MASK
        self.bits()

    def bits(self) -> int:
        """64 random bits."""
        self.state = (self.state + _STEP) & _MASK
        z = self.state
        z = ((z ^ (z >> 30)) * 0xBF58476D1CE4E5B9) & _MASK
        z = ((z ^ (z >> 27)) * 0x94D049BB133111EB) & _MASK
        return z ^ (z >> 31)

    def uniform(self, low: float = 0.0, high: float = 1.0) -> float:
        """Evenly between the two."""
        return low + (high - low) * ((self.bits() >> 11) * 2.0**-53)

    def normal(self, sigma: float = 1.0) -> float:
        """Mean 0, standard deviation `sigma`."""
        return sigma * (sum(self.uniform() for _ in range(12)) - 6.0)

    def within(self, limit: float) -> float:
        """Normal with a third of `limit` as its deviation, never beyond `limit`: an error that a data
        sheet bounds."""
        return max(-limit, min(limit, self.normal(limit / 3.0)))

    def waiting(self, mean: float) -> float:
        """Time to the next of events that come at random, `mean` apart."""
        return -mean * log(1.0 - self.uniform())


@lru_cache(maxsize=1)
def noise_table() -> list[float]:
    """TABLE_SIZE normal deviates of mean 0 and variance 1, the same for everyone; walk it from a random
    place in odd strides."""
    draw = Random(20260105).random
    raw = [sum([draw() for _ in range(12)]) for _ in range(TABLE_SIZE)]
    mean = sum(raw) / TABLE_SIZE
    deviation = (sum([(x - mean) ** 2 for x in raw]) / TABLE_SIZE) ** 0.5
    return [(x - mean) / deviation for x in raw]
