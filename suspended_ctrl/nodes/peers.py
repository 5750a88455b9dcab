"""Which other nodes are there, by what they say on ``/diagnostics`` once a second."""

from suspended_ctrl.review.messages import Diagnostics

# Three reports missed; a node that falls silent on its topics is noticed there long before.
SILENCE_S = 3.5


class Peers:
    """
    Keeps the time of every peer's last report.

    Parameters
    ----------
    namespace : str
        Of the stack, for example ``/`` or ``/cell``.

    """

    def __init__(self, namespace: str) -> None:
        self._prefix = namespace.rstrip('/') + '/'
        self._heard_s: dict[str, float] = {}
        self._active: dict[str, bool] = {}

    def hear(self, now_s: float, diagnostics: Diagnostics) -> None:
        """Take a report that came at a monotonic time."""
        for status in diagnostics.statuses:
            if status.name.startswith(self._prefix) and 'state' in status.values:
                name = status.name[len(self._prefix):]
                self._heard_s[name] = now_s
                self._active[name] = status.values['state'] == 'active'

    def there(self, now_s: float) -> dict[str, bool]:
        """Whether each peer that was ever heard is there and active."""
        return {name: self._active[name] and now_s - heard_s <= SILENCE_S
                for name, heard_s in self._heard_s.items()}
