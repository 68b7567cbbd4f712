"""The command line, and the only place where rigs, simulators, engine and stream come together."""

import os

# Small matrices: one thread is faster than several that wait for each other. Before numpy loads.
for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
