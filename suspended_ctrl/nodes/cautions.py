"""What must be said before rotors may turn: at the start of a live run and in the launch files."""

CAUTIONS = (
    'This is software on a general-purpose computer. It is no safety-rated device.',
    'A hardware emergency stop must remove rotor power by itself.',
    'Keep everybody out of the volume that the platform can reach while the rig is live.',
    'Rotors can exceed 85 dB(A): wear hearing protection.',
    'A risk assessment (ISO 12100) comes first; local codes and licensed practice decide.',
)
