"""`pbm` itself: figures do not depend on how many threads a linear algebra library would take."""

import os
import subprocess
import sys

import pytest

RUN = """
import sys
import pbm.commands.main as pbm
try:
    pbm.main()
except SystemExit:
    pass
import numpy as np
random = np.random.default_rng(1)
matrix = random.random((600, 600))
print(np.linalg.solve(np.einsum("ij,kj->ik", matrix, matrix) + np.eye(600), random.random(600)).tobytes().hex())
"""


@pytest.mark.parametrize("threads", ["1", "2", "4"])
def test_the_last_bit_of_a_figure_does_not_depend_on_threads(threads: str) -> None:
    environment = {**os.environ, "OPENBLAS_NUM_THREADS": threads}
    ran, one = (
        subprocess.run([sys.executable, "-c", RUN, "--version"], env=env, capture_output=True, text=True, check=True)
        for env in (environment, {**os.environ, "OPENBLAS_NUM_THREADS": "1"})
    )
    assert ran.stdout == one.stdout
