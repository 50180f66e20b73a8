"""One thread for linear algebra, in every test and in whatever a test starts.

The matrices here are small. OpenBLAS shares them out all the same, and its threads wait for each other in a
loop: beside another run on the same processors, the eigenvalues of a 384 by 384 matrix took 2.3 s instead of
14 ms. It counts its threads when numpy is imported, so that this must come first.
"""

import os

for name in ("OPENBLAS_NUM_THREADS", "OMP_NUM_THREADS"):
    os.environ.setdefault(name, "1")
