"""Heights from normals at 2048 x 2048, beside scipy's Fourier transforms alone.

Run by hand: python tests/benchmarks/maps.py. Both use as many cores as there are; prints the ratio of the best of
several runs.
"""

from __future__ import annotations

import time
from collections.abc import Callable

import numpy as np
from scipy import fft
from tangentry.nodes.geometry.cores import core_count
from tangentry.nodes.maps.relief import heights_to_normals, normals_to_heights

SIZE = 2048


def best(*works: Callable[[], object], runs: int = 15) -> list[float]:
    """Seconds of the quickest run of each, taken by turns so that what else the machine does falls on all alike."""
    times = [[_seconds(work) for work in works] for _ in range(runs + 1)]
    return [min(column) for column in zip(*times[1:], strict=True)]


def _seconds(work: Callable[[], object]) -> float:
    start = time.perf_counter()
    work()
    return time.perf_counter() - start


def main() -> None:
    """Print both times and their ratio."""
    x, y = np.meshgrid(*[np.linspace(0, 40 * np.pi, SIZE, endpoint=False)] * 2)
    normals = heights_to_normals((np.sin(x) * np.cos(y)).astype(np.float32), (0.1, 0.1), "wrap", "central")
    one, other = (np.ascontiguousarray(normals[..., k]) for k in (0, 1))

    def transforms() -> None:
        spectrum, _ = (fft.rfft2(values, workers=core_count()) for values in (one, other))
        fft.irfft2(spectrum, s=one.shape, workers=core_count())

    alone, whole = best(transforms, lambda: normals_to_heights(normals, (0.1, 0.1)))
    print(f"{SIZE} x {SIZE}: transforms {alone * 1e3:.0f} ms, heights {whole * 1e3:.0f} ms, ratio {whole / alone:.2f}")


if __name__ == "__main__":
    main()
