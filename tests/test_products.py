"""Matrix products in pieces: the same numbers as in one piece, and the same bits on any number of threads."""

import os
import subprocess
import sys

import numpy as np
import pytest

from reweight.products import LARGEST, product

SHAPES = [(1, 1, 1), (3, 5, 1), (79, 640, 100), (16, 2120, 100), (2120, 16, 100), (33, 4, LARGEST // 8)]


@pytest.mark.parametrize("shape", SHAPES)
def test_pieces_add_up_to_the_whole(shape: tuple[int, int, int]) -> None:
    height, inner, width = shape
    rng = np.random.default_rng(20_260_301)
    left, right = rng.standard_normal((height, inner)), rng.standard_normal((inner, width))

    # entries are sums of `inner` products of order one, each rounded to 1.1e-16 of itself
    np.testing.assert_allclose(product(left, right), left @ right, rtol=0, atol=1e-15 * inner)


def test_transposed_and_strided_matrices_are_taken_as_they_are() -> None:
    rng = np.random.default_rng(20_260_302)
    left, right = rng.standard_normal((500, 70)), rng.standard_normal((500, 240))

    np.testing.assert_allclose(product(left.T, right[:, ::2]), left.T @ right[:, ::2], rtol=0, atol=5e-13)


BITS = """
import hashlib
import numpy as np
from reweight.products import product
rng = np.random.default_rng(20_260_303)
left, right = rng.standard_normal((127, 3000)), rng.standard_normal((3000, 90))
print(hashlib.sha256(product(left, right).tobytes()).hexdigest())
"""


def test_the_number_of_threads_does_not_change_a_bit() -> None:
    def bits(threads: int) -> str:
        settings = os.environ | {"OPENBLAS_NUM_THREADS": str(threads), "OMP_NUM_THREADS": str(threads)}
        return subprocess.run(
            [sys.executable, "-c", BITS], env=settings, capture_output=True, text=True, check=True
        ).stdout

    assert len(bits(1).strip()) == 64
    assert bits(1) == bits(2) == bits(4)
