"""Settings of gunicorn, which reads the names of this module; words of its command line come first.

A worker takes several requests at once, each computed in its own thread, so the linear algebra
library is kept to one thread of its own: set here, before numpy is imported.
"""

from __future__ import annotations

import os
from pathlib import Path

for _variable in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(_variable, "1")

_SHARED_MEMORY = Path("/dev/shm")

bind = "127.0.0.1:8000"
worker_class = "gthread"
workers = min(os.cpu_count() or 1, 4)
threads = 4
preload_app = True  # a wrong setting ends the start, and workers share the memory of the libraries

timeout = 120  # seconds without a sign of life from a worker; no limit of a request
graceful_timeout = 90  # longer than a client waits by default, so that a stop loses no answer
keepalive = 5

max_requests = 20_000  # memory that a library loses comes back
max_requests_jitter = 2_000  # not all workers at once

# A heartbeat file on a disk can block a worker; shared memory can't.
worker_tmp_dir = str(_SHARED_MEMORY) if os.access(_SHARED_MEMORY, os.W_OK) else None
control_socket_disable = True  # it would write below HOME; versions that don't have it pass it over

accesslog = None
errorlog = "-"
