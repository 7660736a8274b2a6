"""Do the bytes of dense linear algebra depend on the number of BLAS threads, and what does one thread cost?

python docs/decisions/0001-one-blas-thread.py [UNKNOWNS ...]
"""

from __future__ import annotations

import hashlib
import sys
import time

import numpy as np
from threadpoolctl import threadpool_info, threadpool_limits

random = np.random.RandomState(1)
print([(lib["internal_api"], lib["version"]) for lib in threadpool_info()])
for unknowns in [int(text) for text in sys.argv[1:]] or [20, 60, 200, 600]:
    design = random.normal(size=(2 * unknowns, unknowns))
    for threads in (1, 2):
        times = []
        with threadpool_limits(threads, user_api="blas"):
            for _ in range(7):
                start = time.perf_counter()
                factor = np.linalg.cholesky(design.T @ design)
                times.append(time.perf_counter() - start)
        digest = hashlib.sha256(factor.tobytes()).hexdigest()[:12]
        print(f"{unknowns:4d} unknowns, {threads} thread(s): {digest} {1000 * min(times):8.3f} ms")
