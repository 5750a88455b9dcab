"""One seed, many independent streams of random numbers."""

import numpy as np

_NAMES = ('mismatch', 'pose', 'imu', 'imu_bias', 'rotor_states', 'carrier_states', 'tether_load',
          'gust', 'faults')


class Streams:
    """
    Random streams of one run, by name.

    Each stream is seeded by its own place under the seed, so drawing more or less from one, or
    leaving one out, changes no other.

    Parameters
    ----------
    seed : int
        Not negative.

    """

    def __init__(self, seed: int) -> None:
        self._children = dict(zip(_NAMES, np.random.SeedSequence(seed).spawn(len(_NAMES)),
                                  strict=True))

    def generator(self, name: str) -> np.random.Generator:
        """Return a new generator at the start of the stream ``name``."""
        return np.random.default_rng(self._children[name])

    def fault_generator(self, kind: int, occurrence: int) -> np.random.Generator:
        """
        Return a new generator for one fault.

        Parameters
        ----------
        kind : int
            Number of the fault's kind.
        occurrence : int
            How many faults of that kind stand before it.

        Returns
        -------
        Generator
            Does not depend on which faults of other kinds there are.

        """
        parent = self._children['faults']
        return np.random.default_rng(np.random.SeedSequence(
            parent.entropy, spawn_key=(*parent.spawn_key, kind, occurrence)))
