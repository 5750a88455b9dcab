"""What the real rig differs in from its file, so that the loop does not know it."""

from dataclasses import dataclass, fields, replace

import numpy as np

from suspended_ctrl.rig.frozen import Array, frozen
from suspended_ctrl.rig.rig import Rig

# Normal draws are cut there, so that a wide spread still gives a rig that can exist.
_SIGMAS_MAX = 3.0
_FACTOR_MIN = 0.1


@dataclass(frozen=True, eq=False)
class Mismatch:
    """
    Factors and offsets from the nominal rig to the true one.

    Attributes
    ----------
    mass_factor : float
        On the body's mass.
    centre_offset_m : ndarray, shape (3,)
        Of the centre of mass, ``base_link`` axes.
    inertia_factor : ndarray, shape (3,)
        On the principal moments about the centre of mass, smallest first.
    stiffness_factor : float
        On the tether's stiffness.
    thrust_factor : ndarray, shape (n,)
        On each rotor's thrust; its torque stays.
    lag_factor : float
        On every rotor's time constant.

    """

    mass_factor: float
    centre_offset_m: Array
    inertia_factor: Array
    stiffness_factor: float
    thrust_factor: Array
    lag_factor: float

    @classmethod
    def none(cls, rig: Rig) -> 'Mismatch':
        """Make the mismatch of a rig that is exactly as its file says."""
        return cls(1.0, frozen(np.zeros(3)), frozen(np.ones(3)), 1.0,
                   frozen(np.ones(rig.rotors.count)), 1.0)

    def applied_to(self, rig: Rig) -> Rig:
        """
        Make the true rig.

        Parameters
        ----------
        rig : Rig
            As the file says.

        Returns
        -------
        Rig
            As it is. Should the drawn moments be such as no body can have, all three are brought
            towards the nominal ones until one can.

        """
        body, rotors, tether = rig.body, rig.rotors, rig.tether
        return replace(
            rig,
            body=replace(body, mass_kg=body.mass_kg * self.mass_factor,
                         centre_of_mass_m=frozen(body.centre_of_mass_m + self.centre_offset_m),
                         inertia_kg_m2=_scaled_inertia(body.inertia_kg_m2, self.inertia_factor)),
            rotors=replace(rotors,
                           curve_thrust_n=frozen(
                               rotors.curve_thrust_n * self.thrust_factor[:, None]),
                           time_constant_s=frozen(rotors.time_constant_s * self.lag_factor)),
            tether=replace(tether,
                           stiffness_n_per_m=tether.stiffness_n_per_m * self.stiffness_factor))


def _scaled_inertia(inertia: Array, factor: Array) -> Array:
    moments, axes = np.linalg.eigh(inertia)
    change = factor - 1.0
    for _ in range(60):
        scaled = moments * (1.0 + change)
        if 2.0 * scaled.max() <= scaled.sum() and scaled.min() > 0.0:
            break
        change = 0.5 * change
    else:
        scaled = moments
    out = (axes * scaled) @ axes.T
    return frozen(0.5 * (out + out.T))


@dataclass(frozen=True)
class MismatchSpread:
    """
    What mismatch is drawn from; the defaults are the bench's.

    An offset is the same in every draw, a sigma is the spread of a normal draw round it, cut at
    three sigma. Mass, stiffness and lag default to a fixed offset: heavier, stiffer, slower than
    the file says. The centre of mass is always off by ``centre_m``, in a direction drawn evenly
    over the sphere. Thrust is drawn for each rotor, inertia for each principal moment.
    """

    mass_offset: float = 0.03
    mass_sigma: float = 0.0
    centre_m: float = 0.004
    inertia_sigma: float = 0.04
    stiffness_offset: float = 0.05
    stiffness_sigma: float = 0.0
    thrust_sigma: float = 0.04
    lag_offset: float = 0.10
    lag_sigma: float = 0.0

    def scaled(self, factor: float) -> 'MismatchSpread':
        """Return the spread with every offset and sigma multiplied by ``factor``."""
        return MismatchSpread(**{f.name: factor * getattr(self, f.name) for f in fields(self)})


def draw_mismatch(rig: Rig, rng: np.random.Generator,
                  spread: MismatchSpread | None = None) -> Mismatch:
    """
    Draw how the true rig differs from its file.

    Parameters
    ----------
    rig : Rig
        As its file says.
    rng : Generator
        As many numbers are taken from it whatever the spread.
    spread : MismatchSpread, optional
        How wide to draw.

    Returns
    -------
    Mismatch

    """
    spread = spread or MismatchSpread()
    direction = rng.standard_normal(3)
    shared = _cut(rng.standard_normal(3))
    moments = _cut(rng.standard_normal(3))
    thrusts = _cut(rng.standard_normal(rig.rotors.count))
    return Mismatch(
        mass_factor=float(_factor(spread.mass_offset + spread.mass_sigma * shared[0])),
        centre_offset_m=frozen(spread.centre_m * direction / np.linalg.norm(direction)),
        inertia_factor=frozen(_factor(spread.inertia_sigma * moments)),
        stiffness_factor=float(
            _factor(spread.stiffness_offset + spread.stiffness_sigma * shared[1])),
        thrust_factor=frozen(_factor(spread.thrust_sigma * thrusts)),
        lag_factor=float(_factor(spread.lag_offset + spread.lag_sigma * shared[2])))


def _cut(draws: Array) -> Array:
    return np.clip(draws, -_SIGMAS_MAX, _SIGMAS_MAX)


def _factor(change: Array | float) -> Array:
    return np.maximum(1.0 + np.asarray(change), _FACTOR_MIN)
