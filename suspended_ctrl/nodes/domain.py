"""A ROS domain of one's own on this machine, and what its processes leave behind."""

from collections.abc import Iterator
from contextlib import contextmanager, suppress
import fcntl
import os
from pathlib import Path
import re
import tempfile
import time

# Participants of higher domains would take ports that Linux hands out to anybody.
_FIRST, _LAST = 1, 101
# Ports of a domain: DDSI-RTPS 2.3, 9.6.1.
_PORT_BASE, _PORTS_A_DOMAIN = 7400, 250
_SHARED_MEMORY = Path('/dev/shm')
# A younger segment's owner may be about to lock it.
_SETTLED_S = 5.0


class NoDomainError(RuntimeError):
    """Every domain is in use."""


@contextmanager
def own_domain() -> Iterator[int]:
    """
    Hold a domain that nobody else on this machine uses.

    Others of us are kept out by a lock that ends with this process, however it ends; anybody
    else's participants show in the ports that they listen on.

    Yields
    ------
    int
        The domain's number.

    Raises
    ------
    NoDomainError

    """
    folder = Path(tempfile.gettempdir()) / 'suspended_ctrl_domains'
    with suppress(FileExistsError):
        folder.mkdir()
        folder.chmod(0o1777)
    for domain in _order():
        lock = _locked(folder / str(domain))
        if lock is None:
            continue
        try:
            if not _in_use(domain):
                try:
                    yield domain
                finally:
                    sweep(domain)
                return
        finally:
            os.close(lock)
    raise NoDomainError(f'every ROS domain from {_FIRST} to {_LAST} is in use on this machine')


def _order() -> list[int]:
    """Domains, each process starting somewhere else so that two rarely meet."""
    count = _LAST - _FIRST + 1
    return [_FIRST + (os.getpid() * 7 + i) % count for i in range(count)]


def _locked(path: Path) -> int | None:
    try:
        descriptor = os.open(path, os.O_RDWR | os.O_CREAT | os.O_CLOEXEC, 0o666)
    except OSError:
        return None  # another user's, and not for us
    with suppress(OSError):
        os.chmod(path, 0o666)
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        os.close(descriptor)
        return None
    return descriptor


def _ports(domain: int) -> range:
    first = _PORT_BASE + _PORTS_A_DOMAIN * domain
    return range(first, first + _PORTS_A_DOMAIN)


def _in_use(domain: int) -> bool:
    ports = _ports(domain)
    for table in ('/proc/net/udp', '/proc/net/udp6'):
        with suppress(OSError):
            for line in Path(table).read_text().splitlines()[1:]:
                if int(line.split()[1].rsplit(':', 1)[1], 16) in ports:
                    return True
    return False


def sweep(domain: int) -> None:
    """
    Remove shared memory that killed processes left behind.

    That is the ports of the domain, which is ours alone, and segments whose owner is gone: its
    lock on the file beside the segment is free then, which is how the middleware's own tool tells.

    Parameters
    ----------
    domain : int
        ROS_DOMAIN_ID.

    """
    ports = _ports(domain)
    with suppress(OSError):
        for path in list(_SHARED_MEMORY.iterdir()):
            port = re.fullmatch(r'(?:sem\.)?fastrtps_port(\d+).*', path.name)
            if port is not None:
                if int(port[1]) in ports:
                    _remove(path)
            elif re.fullmatch(r'fastrtps_[0-9a-f]+_el', path.name):
                _remove_segment(path)


def _remove_segment(lock: Path) -> None:
    try:
        if time.time() - lock.stat().st_mtime < _SETTLED_S:
            return
        descriptor = os.open(lock, os.O_RDWR | os.O_CLOEXEC)
    except OSError:
        return
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except OSError:
        return  # its owner lives
    finally:
        os.close(descriptor)
    _remove(lock.with_name(lock.name.removesuffix('_el')))
    _remove(lock)


def _remove(path: Path) -> None:
    with suppress(OSError):
        path.unlink()
