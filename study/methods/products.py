"""Matrix products whose bits do not depend on how many threads the machine has."""

from functools import cache

import numpy as np
from threadpoolctl import ThreadpoolController


@cache
def _controller() -> ThreadpoolController:
    return ThreadpoolController()


def product(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    """a @ b on one thread: on several, a library may add up in another order."""
    with _controller().limit(limits=1, user_api="blas"):
        return a @ b
