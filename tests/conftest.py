"""One thread for small matrices: on a busy machine threads wait for each other longer than they work."""

from __future__ import annotations

import os

os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
