"""The kernel decorator leaves Numba as a user knows it."""

from __future__ import annotations

import subprocess
import sys


def test_a_users_own_linear_algebra_still_compiles() -> None:
    # Our kernels are made without scipy in sight; Numba needs its BLAS for these two.
    program = (
        "import sys, numba, numpy as np\n"
        "import groundglow.retrieval.chain_cloud\n"
        "assert 'scipy.linalg' not in sys.modules\n"
        "solve = numba.njit(lambda a, b: np.linalg.inv(a) @ b)\n"
        "print(solve(np.eye(3) * 2.0, np.ones(3)).tolist())"
    )
    done = subprocess.run([sys.executable, "-c", program], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert done.stdout.strip() == "[0.5, 0.5, 0.5]"
