"""Owners of texels beside a plain loop in C: 2048 x 2048 texels, 1,000,000 triangles.

Run by hand: python tests/benchmarks/raster.py. Needs a C compiler; prints the ratio of the best of several runs.
"""

from __future__ import annotations

import ctypes
import subprocess
import tempfile
import time
from collections.abc import Callable
from pathlib import Path

import numpy as np
from tangentry.nodes.geometry.texels import texel_owners

SIZE, CELLS = 2048, 707
SOURCE = r"""
#include <math.h>
#include <stdint.h>
void owners(const double *places, long count, int width, int height, int32_t *triangle, float *weights) {
  for (long t = 0; t < count; t++) {
    const double *p = places + 6 * t;
    double x0 = p[0] * width, y0 = p[1] * height, x1 = p[2] * width, y1 = p[3] * height;
    double x2 = p[4] * width, y2 = p[5] * height;
    double area = (x1 - x0) * (y2 - y0) - (x2 - x0) * (y1 - y0);
    if (area == 0) continue;
    double over = 1 / area;
    int left = (int)ceil(fmin(x0, fmin(x1, x2)) - 0.5), right = (int)floor(fmax(x0, fmax(x1, x2)) - 0.5);
    int top = (int)ceil(fmin(y0, fmin(y1, y2)) - 0.5), bottom = (int)floor(fmax(y0, fmax(y1, y2)) - 0.5);
    if (left < 0) left = 0;
    if (top < 0) top = 0;
    if (right >= width) right = width - 1;
    if (bottom >= height) bottom = height - 1;
    for (int r = top; r <= bottom; r++)
      for (int c = left; c <= right; c++) {
        double x = c + 0.5, y = r + 0.5;
        double one = ((x2 - x) * (y0 - y) - (x0 - x) * (y2 - y)) * over;
        double two = ((x0 - x) * (y1 - y) - (x1 - x) * (y0 - y)) * over;
        if (one < 0 || two < 0 || one + two > 1) continue;
        long at = (long)r * width + c;
        triangle[at] = (int32_t)t;
        weights[2 * at] = (float)one;
        weights[2 * at + 1] = (float)two;
      }
  }
}
"""


def compiled(source: str) -> ctypes.CDLL:
    """The C source as a library, -O3 for this machine."""
    folder = Path(tempfile.mkdtemp())
    (folder / "loop.c").write_text(source)
    words = [
        "cc",
        "-O3",
        "-march=native",
        "-shared",
        "-fPIC",
        "-o",
        str(folder / "loop.so"),
        str(folder / "loop.c"),
        "-lm",
    ]
    subprocess.run(words, check=True)
    return ctypes.CDLL(str(folder / "loop.so"))


def best(call: Callable[[], object], runs: int = 7) -> float:
    """Seconds of the quickest of several runs, after one to warm up."""
    call()
    taken = []
    for _ in range(runs):
        start = time.perf_counter()
        call()
        taken.append(time.perf_counter() - start)
    return min(taken)


def grid(cells: int) -> np.ndarray:
    """(2 cells^2, 3, 2) float64: the unit square in triangles, its inner points shaken."""
    at = np.stack(np.meshgrid(np.arange(cells + 1), np.arange(cells + 1), indexing="ij"), axis=-1) / cells
    at[1:-1, 1:-1] += np.random.default_rng(0).uniform(-0.3, 0.3, (cells - 1, cells - 1, 2)) / cells
    a, b, c, d = at[:-1, :-1], at[1:, :-1], at[1:, 1:], at[:-1, 1:]
    return np.stack([np.stack([a, b, c], axis=2), np.stack([a, c, d], axis=2)], axis=2).reshape(-1, 3, 2)


def main() -> None:
    """Print both times and their ratio."""
    places = grid(CELLS)
    loop = compiled(SOURCE)
    triangle, weights = np.full((SIZE, SIZE), -1, np.int32), np.zeros((SIZE, SIZE, 2), np.float32)
    pointers = [array.ctypes.data_as(ctypes.c_void_p) for array in (places, triangle, weights)]
    in_c = best(lambda: loop.owners(pointers[0], ctypes.c_long(len(places)), SIZE, SIZE, *pointers[1:]))
    here = best(lambda: texel_owners(places, SIZE, SIZE))
    print(
        f"{len(places):,} triangles, {SIZE} x {SIZE}: C {in_c * 1e3:.1f} ms, here {here * 1e3:.1f} ms,"
        f" ratio {here / in_c:.2f}"
    )


if __name__ == "__main__":
    main()
