"""Which columns are independent, decided exactly: elimination of the cross-products modulo a prime.

A pivot that is not 0 modulo a prime is not 0. One that is 0 modulo two primes near 2^31 is 0 but for a chance below
1e-12 (Schwartz 1980, "Fast probabilistic algorithms for verification of polynomial identities").
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Objects = NDArray[np.object_]

PRIMES = (2147483647, 2147483629)


def independent(cross_products: Objects) -> tuple[list[int], bool]:
    """The columns that do not depend on earlier ones, and whether the last (the response) depends on them.

    `cross_products` (m + 1, m + 1): exact integers, positive semidefinite, the response last.
    """
    fresh = _pivots(cross_products, PRIMES[0])
    if not fresh.all():
        fresh |= _pivots(cross_products, PRIMES[1])
    return np.flatnonzero(fresh[:-1]).tolist(), not fresh[-1]


def _pivots(cross_products: Objects, prime: int) -> NDArray[np.bool_]:
    left = np.asarray(cross_products % prime, dtype=np.int64)
    fresh = np.zeros(len(left), dtype=bool)
    for k in range(len(left)):
        pivot = int(left[k, k])
        if pivot:
            fresh[k] = True
            factor = left[k + 1 :, k] * pow(pivot, -1, prime) % prime
            left[k + 1 :, k + 1 :] = (left[k + 1 :, k + 1 :] - factor[:, None] * left[k, k + 1 :]) % prime
    return fresh
