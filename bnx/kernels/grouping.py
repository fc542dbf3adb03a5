"""Numbers of one sign brought together by their size, without sorting them."""

import numpy as np

from bnx.kernels.compiling import kernel

__all__ = ["BINS", "SHIFT", "group_by_size"]

SHIFT = 43  # bits of a number that do not tell its bin: 512 bins from one power of 2 to the next
BINS = 1 << (63 - SHIFT)


@kernel
def group_by_size(numbers: np.ndarray, bits: np.ndarray, grouped: np.ndarray) -> np.ndarray:
    """Write numbers of at least 0 bin by bin, the bin of the smallest first, in each as they come; NaN is left out.

    bits int64 (m,): the same numbers as they are stored, whose order is theirs; grouped (m,): written from the start.

    Returns:
        How many lie in each bin, int64 (BINS,).
    """
    places = np.zeros(BINS + 1, np.int64)
    for k in range(numbers.size):
        if numbers[k] == numbers[k]:
            places[(max(bits[k], 0) >> SHIFT) + 1] += 1
    counts = places[1:].copy()
    for b in range(BINS):
        places[b + 1] += places[b]
    for k in range(numbers.size):
        if numbers[k] == numbers[k]:
            b = max(bits[k], 0) >> SHIFT
            grouped[places[b]] = numbers[k]
            places[b] += 1
    return counts
