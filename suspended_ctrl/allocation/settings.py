"""Settings of the effort allocator."""

from dataclasses import dataclass


@dataclass(frozen=True)
class EffortSettings:
    """
    Settings of the allocator.

    Attributes
    ----------
    allocator : str
        Name of a strategy.
    transport_s : float
        From the allocator's step to the drives, half a tick of hold included.
    tick_s : float
        Between two steps, as a rule.
    lag_gain : float
        Lag inversion: commands lead by this factor.

    """

    allocator: str = 'horizon_qp'
    transport_s: float = 0.0045
    tick_s: float = 0.005
    lag_gain: float = 1.3
