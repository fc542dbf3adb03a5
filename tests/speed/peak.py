"""What the machine can do at most: population counts from the first-level cache, reading from memory, its clock."""

import threading
import time
from collections.abc import Callable

import numpy as np
from numba import njit, types
from numba.extending import intrinsic

__all__ = ["clock_rate", "popcount_peak", "read_rate"]

WORDS = 3072  # of all planes of a loop: 24 KiB, less than any first-level cache of today
BURSTS = 20  # short ones, so that some of them are not disturbed
CALLS = 10_000  # pairs of planes of 512 words in a burst


@intrinsic
def _ones(typing_context, word):  # type: ignore[no-untyped-def]  # numba's own types have no annotations
    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return builder.ctpop(arguments[0])

    return types.uint64(types.uint64), generate


@njit(nogil=True, cache=True)
def one_pair(planes: np.ndarray, rounds: int) -> int:
    """AND two planes, count the ones and add them up; the start differs from round to round.

    The compiler spreads the sum over several vectors, so no addition waits for another.
    """
    total, words = np.uint64(0), WORDS // 2
    for r in range(rounds):
        shift = 8 * (r & 7)
        a, b = planes[0, shift : shift + words], planes[1, :words]
        for w in range(words):
            total += _ones(a[w] & b[w])
    return total


@njit(nogil=True, cache=True)
def two_by_two(planes: np.ndarray, rounds: int) -> int:
    """AND each of two planes with each of two others: four sums, half the reading."""
    total, words = np.uint64(0), WORDS // 4
    for r in range(rounds):
        shift = 8 * (r & 7)
        a, b = planes[0, shift : shift + words], planes[1, shift : shift + words]
        x, y = planes[2, :words], planes[3, :words]
        s0 = s1 = s2 = s3 = np.uint64(0)
        for w in range(words):
            s0 += _ones(a[w] & x[w])
            s1 += _ones(a[w] & y[w])
            s2 += _ones(b[w] & x[w])
            s3 += _ones(b[w] & y[w])
        total += s0 + s1 + s2 + s3
    return total


@njit(nogil=True, cache=True)
def four_by_two(planes: np.ndarray, rounds: int) -> int:
    """AND each of four planes with each of two others: eight sums."""
    total, words = np.uint64(0), WORDS // 6
    for r in range(rounds):
        shift = 8 * (r & 7)
        a, b = planes[0, shift : shift + words], planes[1, shift : shift + words]
        c, d = planes[2, shift : shift + words], planes[3, shift : shift + words]
        x, y = planes[4, :words], planes[5, :words]
        s0 = s1 = s2 = s3 = s4 = s5 = s6 = s7 = np.uint64(0)
        for w in range(words):
            s0 += _ones(a[w] & x[w])
            s1 += _ones(a[w] & y[w])
            s2 += _ones(b[w] & x[w])
            s3 += _ones(b[w] & y[w])
            s4 += _ones(c[w] & x[w])
            s5 += _ones(c[w] & y[w])
            s6 += _ones(d[w] & x[w])
            s7 += _ones(d[w] & y[w])
        total += s0 + s1 + s2 + s3 + s4 + s5 + s6 + s7
    return total


LOOPS: dict[str, tuple[Callable[[np.ndarray, int], int], int, int]] = {
    "one plane with one": (one_pair, 2, 1),
    "two planes with two": (two_by_two, 4, 4),
    "four planes with two": (four_by_two, 6, 8),
}
"""Loop, planes it reads, pairs of planes it counts."""


def popcount_peak(threads: int, bursts: int = BURSTS) -> dict[str, float]:
    """Give words per second of each loop's best burst, on all threads together."""
    rng = np.random.default_rng(7)
    found = {}
    for name, (loop, planes, pairs) in LOOPS.items():
        words = WORDS // planes
        rounds = CALLS * 512 // words // pairs
        bits = [rng.integers(0, 2**63, (planes, words + 64), np.uint64) for _ in range(threads)]
        loop(bits[0], 1)
        fastest = min(_at_once(loop, bits, rounds) for _ in range(bursts))
        found[name] = threads * rounds * words * pairs / fastest
    return found


def _at_once(loop: Callable[[np.ndarray, int], int], bits: list[np.ndarray], rounds: int) -> float:
    threads = [threading.Thread(target=loop, args=(planes, rounds)) for planes in bits]
    start = time.perf_counter()
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    return time.perf_counter() - start


@njit(nogil=True, cache=True)
def _chain(steps: int) -> int:
    """Shift and XOR in a chain in which each of six steps needs the one before: six cycles a round.

    Source: Marsaglia 2003 (the generator); one cycle for a shift or an XOR is common practice, no source.
    """
    x = np.uint64(88172645463325252)
    for _ in range(steps):
        x ^= x << np.uint64(13)
        x ^= x >> np.uint64(7)
        x ^= x << np.uint64(17)
    return x


def clock_rate(bursts: int = 100, steps: int = 200_000) -> float:
    """Measure cycles per second by a chain of one-cycle instructions; the best burst, as others only disturb it."""
    _chain(1)
    return 6 * steps / min(_seconds(lambda: _chain(steps)) for _ in range(bursts))


def read_rate(bursts: int = 10, megabytes: int = 256) -> float:
    """Measure bytes per second that one thread reads from memory when it only adds them up; the best burst."""
    numbers = np.ones(megabytes * 2**20 // 8, np.uint64)
    return numbers.nbytes / min(_seconds(numbers.sum) for _ in range(bursts))


def _seconds(task: Callable[[], object]) -> float:
    start = time.perf_counter()
    task()
    return time.perf_counter() - start
