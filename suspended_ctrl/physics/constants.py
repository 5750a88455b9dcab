"""Constants of the physics."""

from suspended_ctrl.rig.constants import GRAVITY_M_S2

__all__ = ['GRAVITY_M_S2']
