"""Settings of the whole suite."""

import os

# As the command line does: before numpy is first imported, and one thread for each worker.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
