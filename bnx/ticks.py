"""Round numbers for the axis of a chart."""

import math

__all__ = ["round_ticks"]


def round_ticks(low: float, high: float, about: int = 6) -> list[float]:
    """List round numbers from ``low`` to ``high``, steps 1, 2 or 5 times a power of ten."""
    rough = max(high - low, 1e-12) / about
    power = 10.0 ** math.floor(math.log10(rough))
    step = next(factor * power for factor in (1, 2, 5, 10) if factor * power >= rough * 0.999)
    first, last = math.ceil(low / step - 1e-9), math.floor(high / step + 1e-9)
    return [number * step for number in range(first, last + 1)]
