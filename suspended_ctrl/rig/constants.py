"""Constants that the checks of a rig file need as well as the physics."""

# Standard acceleration of free fall, CGPM 1901.
GRAVITY_M_S2 = 9.80665
