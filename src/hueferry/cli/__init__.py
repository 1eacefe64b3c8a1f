"""The command line: parse, call the verbs, print.

Linear algebra keeps to one thread here: our matrices are small, pictures are shared out over the cores by ourselves,
and waiting threads of a busy machine's BLAS cost several times what they bring. It has to be said before NumPy loads.
"""

import os

for _name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(_name, "1")
