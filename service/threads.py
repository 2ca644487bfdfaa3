"""One thread for each process that solves: several share the cores, small matrices gain nothing by more.

Threads of linear algebra that wait for one another on a busy machine made a check take a hundred times longer.
"""

ONE_THREAD = dict.fromkeys(("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"), "1")
"""Environment that the libraries read when they are loaded."""
