"""Shards: the shares of a night that machines of a farm bake without talking to each other."""

import hashlib
from typing import NamedTuple


class Shard(NamedTuple):
    """Shard `number` of `count`, numbered from 0. Who owns a probe depends on its name alone."""

    number: int
    count: int

    @classmethod
    def parse(cls, text: str) -> "Shard":
        """From 'K/N'. Raises: ValueError."""
        number, _, count = text.partition("/")
        shard = cls(int(number), int(count))
        if not 0 <= shard.number < shard.count:
            raise ValueError(text)
        return shard

    @property
    def file_name(self) -> str:
        return f"{self.number}-of-{self.count}"

    def owns(self, name: str) -> bool:
        """Whether the probe of this name is baked here."""
        digest = hashlib.sha256(name.encode()).digest()
        return int.from_bytes(digest[:8], "big") % self.count == self.number
