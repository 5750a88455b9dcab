"""When each sample is taken, and when it arrives."""

from collections.abc import Callable
import heapq
from itertools import count
import math

from suspended_ctrl.bench.values import BenchSample

# Sampling moments this much of a step after a step count as on it.
_ROUNDING_STEPS = 1e-6
# Arrival this much before a time counts as at it, s.
_ROUNDING_S = 1e-9

Filter = Callable[[BenchSample], BenchSample | None]


class Delivery:
    """Samples on their way, handed out in order of arrival, each once."""

    def __init__(self) -> None:
        self._waiting: list[tuple[float, int, BenchSample]] = []
        self._number = count()

    def push(self, arrival_s: float, sample: BenchSample) -> None:
        """Put a sample on its way; those that arrive together keep the order they came in."""
        heapq.heappush(self._waiting, (arrival_s, next(self._number), sample))

    def until(self, t_s: float) -> list[BenchSample]:
        """Hand out what has arrived at ``t_s``."""
        waiting, arrived = self._waiting, []
        limit = t_s + _ROUNDING_S
        while waiting and waiting[0][0] <= limit:
            arrived.append(heapq.heappop(waiting)[2])
        return arrived


class Channel:
    """
    One sensor's samples: when they are taken, what faults do to them, how late they are.

    Parameters
    ----------
    measure : callable
        Takes a stamp, gives a sample.
    period_steps : float
        Plant steps from one sample to the next; where that is no whole number, each sample is
        taken at the first step at or after its moment.
    latency_s : float

    Attributes
    ----------
    filters : list of callable
        Each takes a sample and gives one, or None to lose it.
    later_s : float
        Added to the latency.
    last : sample or None
        The newest one put on its way.
    due : int
        Step at which the next sample is taken.

    """

    def __init__(self, measure: Callable[[float], BenchSample], period_steps: float,
                 latency_s: float) -> None:
        self._measure = measure
        self._period = period_steps
        self._taken = 0
        self._latency_s = latency_s
        self.later_s = 0.0
        self.filters: list[Filter] = []
        self.last: BenchSample | None = None
        self.due = 0

    @property
    def delay_s(self) -> float:
        """From the moment of a sample to its arrival."""
        return self._latency_s + self.later_s

    def take(self, t_s: float, stamp_s: float, delivery: Delivery) -> None:
        """
        Take a sample and put it on its way.

        Parameters
        ----------
        t_s : float
            The moment.
        stamp_s : float
            What the sensor's clock calls it.
        delivery : Delivery
            Where it goes.

        """
        self._taken += 1
        self.due = math.ceil(self._taken * self._period - _ROUNDING_STEPS)
        sample: BenchSample | None = self._measure(stamp_s)
        for change in self.filters:
            if sample is None:
                return
            sample = change(sample)
        if sample is not None:
            self.last = sample
            delivery.push(t_s + self._latency_s + self.later_s, sample)
