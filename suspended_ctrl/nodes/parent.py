"""End with the process that started this one, however that ends."""

import ctypes
import os
import signal
import sys

# Set to its own process id by whoever wants its children to end with it.
PARENT_VARIABLE = 'SUSPENDED_CTRL_PARENT'
_PR_SET_PDEATHSIG = 1


def end_with_parent() -> None:
    """Be told to end when the process named in the environment dies, if one is."""
    parent = os.environ.get(PARENT_VARIABLE)
    if parent is None or not sys.platform.startswith('linux'):
        return
    ctypes.CDLL(None, use_errno=True).prctl(_PR_SET_PDEATHSIG, signal.SIGTERM)
    if os.getppid() != int(parent):
        # It died before this process could listen for it.
        raise SystemExit(1)
