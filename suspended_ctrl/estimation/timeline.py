"""Samples in the order of their stamps, whatever the order of their arrival."""

from bisect import bisect_left, bisect_right
from dataclasses import dataclass, field

from suspended_ctrl.rig.frozen import Array

# Kinds, in the order in which samples of one stamp are absorbed.
PAYLOAD, CARRIER, ROTORS, TETHER, IMU, POSE, SETTLED = range(7)
KIND_NAMES = ('payload', 'carrier', 'rotors', 'tether', 'imu', 'pose', 'settled')

Key = tuple[float, int]
# Rate and force; position and attitude; or one vector and another of no components: rotor speeds,
# anchor, tension. Mass (1) and place of a payload.
Entry = tuple[Array, Array]


@dataclass(eq=False, slots=True)
class Timeline:
    """Samples by (stamp, kind), those before ``taken`` absorbed."""

    keys: list[Key] = field(default_factory=list)
    entries: list[Entry] = field(default_factory=list)
    taken: int = 0

    def add(self, key: Key, entry: Entry) -> bool:
        """Put a sample in its place; false, and nothing done, if there is one with its key."""
        keys = self.keys
        if not keys or key > keys[-1]:
            keys.append(key)
            self.entries.append(entry)
            return True
        place = bisect_left(keys, key)
        if keys[place] == key:
            return False
        keys.insert(place, key)
        self.entries.insert(place, entry)
        return True

    def rewind(self, key: Key) -> None:
        """Everything after ``key`` counts as not absorbed."""
        self.taken = bisect_right(self.keys, key)

    def forget(self, before_s: float) -> None:
        """Drop absorbed samples with stamps under ``before_s``."""
        count = min(bisect_left(self.keys, (before_s, 0)), self.taken)
        del self.keys[:count]
        del self.entries[:count]
        self.taken -= count

    def drop(self, before_s: float) -> None:
        """Drop every sample with a stamp under ``before_s``."""
        count = bisect_left(self.keys, (before_s, -1))
        del self.keys[:count]
        del self.entries[:count]
        self.taken = max(self.taken - count, 0)

    def after(self, key: Key) -> int:
        """Index of the first sample after ``key``."""
        return bisect_right(self.keys, key)

    def clear(self) -> None:
        """Drop everything."""
        self.keys.clear()
        self.entries.clear()
        self.taken = 0

    def between(self, first: int, until_s: float) -> list[tuple[Key, Entry]]:
        """Return samples from index ``first`` on with stamps up to ``until_s``."""
        last = bisect_right(self.keys, (until_s, POSE))
        return list(zip(self.keys[first:last], self.entries[first:last], strict=True))
