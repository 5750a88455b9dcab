"""Parts by name: the ones that come with the package, and others' through entry points."""

from collections.abc import Callable, Mapping
from importlib.metadata import entry_points
from typing import Generic, TypeVar

_Part = TypeVar('_Part')


class UnknownNameError(LookupError):
    """A name that no registered part has; the message lists those there are."""


class Registry(Generic[_Part]):
    """
    Makers of one kind of part, by name.

    Parameters
    ----------
    kind : str
        What they make, for messages: 'law', 'allocator'.
    group : str
        Entry point group in which others' packages name theirs.
    builtin : mapping of str to callable
        The package's own makers.

    """

    def __init__(self, kind: str, group: str,
                 builtin: Mapping[str, Callable[..., _Part]]) -> None:
        self._kind = kind
        self._group = group
        self._builtin = dict(builtin)

    def names(self) -> list[str]:
        """Names of all makers, the package's own first."""
        others = sorted({point.name for point in entry_points(group=self._group)})
        return [*self._builtin, *(name for name in others if name not in self._builtin)]

    def maker(self, name: str) -> Callable[..., _Part]:
        """
        Find a maker.

        Parameters
        ----------
        name : str
            As ``names`` lists it.

        Returns
        -------
        callable

        Raises
        ------
        UnknownNameError
            If there is none of that name.

        """
        if name in self._builtin:
            return self._builtin[name]
        for point in entry_points(group=self._group, name=name):
            loaded: Callable[..., _Part] = point.load()
            return loaded
        raise UnknownNameError(
            f'{self._kind} {name!r} is not known: choose one of {", ".join(self.names())}')
