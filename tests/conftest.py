"""Shared by all tests: makes tests/references importable, and keeps the processes out of each other's way."""

import os
import signal
import sys
from pathlib import Path

# Tests run in one process per core; two threads in each would wait for each other. Read when numpy and
# numba load.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
os.environ.setdefault("NUMBA_NUM_THREADS", "1")
sys.path.insert(0, str(Path(__file__).parent))

# A runner in the background may have been started with Ctrl-C ignored, and every process under it inherits that.
if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
    signal.signal(signal.SIGINT, signal.default_int_handler)
