"""
When the rig must stop, and how: the last word before the drivers.

What this package is, and is not. It is software on a general-purpose computer. It is no
safety-rated device, claims no performance level, and replaces none of these:

- a hardware emergency stop that removes rotor power by itself, without this program;
- people staying out of the volume while the rig is live, by guards or other safeguards;
- a risk assessment (ISO 12100) before the first power-up, which also decides whether an immediate
  cut (category 0) or a controlled stop (category 1) is the safer one for a given hazard: a
  platform that is cut while it is displaced swings (``swing``);
- local codes and licensed practice, which decide.

Rotor noise can exceed 85 dB(A), the upper action value of Directive 2003/10/EC: wear hearing
protection.

Stop categories are those of IEC 60204-1: 0, power removed at once; 1, brought to rest under power,
then power removed; 2, held at rest under power. ``limits`` is the table of what is watched,
``sequence`` the table of states, ``supervisor`` the class that a node or the loop steps.
"""
