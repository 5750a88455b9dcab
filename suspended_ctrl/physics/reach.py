"""
Which wrenches the rotors can give, tether aside: a zonotope described by its facets.

Every facet's normal is orthogonal to five of the rotors' wrench columns; its offset is the support
of the thrust box in that direction (Shephard 1974, zonotopes as sums of segments).
"""

from itertools import combinations

import numpy as np

from suspended_ctrl.physics.rotor import RotorModel
from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

# Relative to the largest of its five columns; below, five rotors span no facet.
_RANK_TOLERANCE = 1e-9


class Reach:
    """
    Reachable wrenches at the nominal centre of mass, ``base_link`` axes.

    Parameters
    ----------
    rig : Rig
    without : tuple of int
        Rotors that have failed and give nothing.

    Attributes
    ----------
    normals : ndarray, shape (m, 6)
        Unit outward normals in scaled coordinates turned back to N and N m.
    offsets : ndarray, shape (m,)
        The set is ``normals @ wrench <= offsets``. Empty when the columns do not span six axes.

    """

    def __init__(self, rig: Rig, without: tuple[int, ...] = ()) -> None:
        model = RotorModel(rig.rotors, rig.body.centre_of_mass_m)
        keep = [i for i in range(rig.rotors.count) if i not in without]
        self.columns = frozen(model.wrench_per_thrust[:, keep])
        self.thrust_min_n = frozen(model.thrust_min_n[keep])
        self.thrust_max_n = frozen(model.thrust_max_n[keep])
        self.rank = int(np.linalg.matrix_rank(self.columns, tol=1e-9))
        self.normals, self.offsets = self._facets()

    def _facets(self) -> tuple[Array, Array]:
        count = self.columns.shape[1]
        if self.rank < 6:
            return frozen(np.zeros((0, 6))), frozen(np.zeros(0))
        sets = np.array(list(combinations(range(count), 5)))
        stacked = self.columns.T[sets]                              # (m, 5, 6)
        _, singular, right = np.linalg.svd(stacked, full_matrices=True)
        normals = right[singular[:, -1] > _RANK_TOLERANCE * singular[:, 0], -1]
        # Coplanar columns give the same facet many times over.
        leading = np.argmax(np.abs(normals) > 1e-7, axis=1)
        sign = np.sign(normals[np.arange(len(normals)), leading])
        normals = np.unique(np.round(normals * sign[:, None], 9), axis=0)
        normals = np.vstack((normals, -normals))
        along = normals @ self.columns
        offsets = (np.maximum(along, 0.0) @ self.thrust_max_n
                   + np.minimum(along, 0.0) @ self.thrust_min_n)
        return frozen(normals), frozen(offsets)

    def use(self, wrench: Array) -> Array:
        """
        Share of the reach that a wrench takes in its own direction.

        Parameters
        ----------
        wrench : ndarray, shape (6,) or (n, 6)
            N and N m, in the axes of the set.

        Returns
        -------
        ndarray, shape () or (n,)
            1 on the border of the set, 0 at rest, infinite where nothing in that direction is
            reachable.

        """
        along = wrench @ self.normals.T
        if not len(self.offsets):
            return np.where(np.any(wrench != 0.0, axis=-1), np.inf, 0.0)
        with np.errstate(divide='ignore', invalid='ignore'):
            share = np.where(self.offsets > 1e-9, along / self.offsets,
                             np.where(along > 1e-9, np.inf, 0.0))
        out: Array = np.maximum(share.max(axis=-1), 0.0)
        return out

    def extreme(self, direction: Array) -> float:
        """Largest multiple of ``direction`` (6,) that is reachable, other components zero."""
        share = float(self.use(direction))
        return 0.0 if not np.isfinite(share) or share <= 0.0 else 1.0 / share

    def axis_table(self) -> Array:
        """Reach along -/+ of each of the six axes, shape (6, 2), as positive numbers."""
        return np.array([[self.extreme(-e), self.extreme(e)] for e in np.eye(6)])
