"""
ROS 2 adapters of the parts, one file a node, and the session that starts a set of them.

Importing the package keeps numerical libraries to one thread a process, before any of them loads:
a tick is too short to share, and threads that spin while they wait take the cores from the others.
"""

import os

for _variable in ('OPENBLAS_NUM_THREADS', 'OMP_NUM_THREADS', 'MKL_NUM_THREADS'):
    os.environ.setdefault(_variable, '1')
