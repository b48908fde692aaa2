"""Re-encoding beside a plain loop in C, frames computed at every texel: 4096 x 4096 texels of 16 bits.

Run by hand: python tests/benchmarks/reencode.py. Both do the same for each texel: decode, take two frames, through
one and back through the inverse of the other, encode. Owners of texels are known to the C loop beforehand; the node's
whole time, rasterising and the gutter included, is given beside that of its texel loop.
"""

from __future__ import annotations

import ctypes
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path[:0] = [str(Path(__file__).parents[1]), str(Path(__file__).parent)]

from raster import best, compiled  # noqa: E402
from shapes import torus  # noqa: E402
from tangentry.nodes.frames import frames  # noqa: E402
from tangentry.nodes.geometry.cores import core_count  # noqa: E402
from tangentry.nodes.geometry.texels import texel_owners  # noqa: E402
from tangentry.nodes.maps.reencode import reencode_sheet  # noqa: E402
from tangentry.nodes.maps.surface import surface_of  # noqa: E402
from tangentry.nodes.model import Sheet  # noqa: E402

SIZE = 4096
SOURCE = r"""
#include <math.h>
#include <stdint.h>
static void frame(const float *k, float w1, float w2, float *m) {
  float w0 = 1 - w1 - w2;
  float n[3], t[3];
  for (int x = 0; x < 3; x++) {
    n[x] = w0 * k[x] + w1 * k[10 + x] + w2 * k[20 + x];
    t[x] = w0 * k[3 + x] + w1 * k[13 + x] + w2 * k[23 + x];
  }
  float s = w0 * k[9] + w1 * k[19] + w2 * k[29];
  m[0] = t[0]; m[1] = t[1]; m[2] = t[2];
  m[3] = (n[1] * t[2] - n[2] * t[1]) * s; m[4] = (n[2] * t[0] - n[0] * t[2]) * s;
  m[5] = (n[0] * t[1] - n[1] * t[0]) * s;
  m[6] = n[0]; m[7] = n[1]; m[8] = n[2];
}
static uint16_t code(float v) {
  float c = rintf((v + 1) * 32767.5f);
  return c < 0 ? 0 : c > 65535 ? 65535 : (uint16_t)c;
}
void move(const uint16_t *in, const int32_t *triangle, const float *w, const float *a, const float *b, long count,
          uint16_t *out) {
  for (long i = 0; i < count; i++) {
    long t = triangle[i];
    if (t < 0) { out[3 * i] = in[3 * i]; out[3 * i + 1] = in[3 * i + 1]; out[3 * i + 2] = in[3 * i + 2]; continue; }
    float m[9], k[9], n[3];
    float x = in[3 * i] / 32767.5f - 1, y = in[3 * i + 1] / 32767.5f - 1, z = in[3 * i + 2] / 32767.5f - 1;
    frame(a + 30 * t, w[2 * i], w[2 * i + 1], m);
    frame(b + 30 * t, w[2 * i], w[2 * i + 1], k);
    for (int c = 0; c < 3; c++) n[c] = x * m[c] + y * m[3 + c] + z * m[6 + c];
    float u[3] = {k[4] * k[8] - k[5] * k[7], k[5] * k[6] - k[3] * k[8], k[3] * k[7] - k[4] * k[6]};
    float v[3] = {k[7] * k[2] - k[8] * k[1], k[8] * k[0] - k[6] * k[2], k[6] * k[1] - k[7] * k[0]};
    float r[3] = {k[1] * k[5] - k[2] * k[4], k[2] * k[3] - k[0] * k[5], k[0] * k[4] - k[1] * k[3]};
    float volume = k[0] * u[0] + k[1] * u[1] + k[2] * u[2];
    x = n[0] * u[0] + n[1] * u[1] + n[2] * u[2];
    y = n[0] * v[0] + n[1] * v[1] + n[2] * v[2];
    z = n[0] * r[0] + n[1] * r[1] + n[2] * r[2];
    float s = (volume < 0 ? -1 : 1) / sqrtf(x * x + y * y + z * z);
    out[3 * i] = code(x * s); out[3 * i + 1] = code(y * s); out[3 * i + 2] = code(z * s);
  }
}
"""


def main() -> None:
    """Print both times and their ratio."""
    base = torus(200, 100)
    made, wanted = (surface_of(frames(base, method=method), [0]) for method in ("mikktspace", "area"))
    codes = np.random.default_rng(0).integers(20000, 45000, (SIZE, SIZE, 3)).astype(np.uint16)
    codes[..., 2] = 60000
    sheet = Sheet("", codes, "normal", "tangent", "up", "unorm")
    owners = texel_owners(made.places, SIZE, SIZE)
    out = np.empty_like(codes)
    arrays = (codes, owners.triangle, owners.weights, made.frames, wanted.frames)
    pointers = [ctypes.c_void_p(np.ascontiguousarray(array).ctypes.data) for array in arrays]
    loop = compiled(SOURCE)
    in_c = best(lambda: loop.move(*pointers, ctypes.c_long(SIZE * SIZE), ctypes.c_void_p(out.ctypes.data)), 3)
    raster = best(lambda: texel_owners(made.places, SIZE, SIZE, conservative=True), 3)
    whole = best(lambda: reencode_sheet(sheet, made, "pixel", wanted, "pixel", 0), 3)
    found = reencode_sheet(replace(sheet), made, "pixel", wanted, "pixel", 0).texels
    print(f"largest difference between the two: {np.abs(found.astype(int) - out).max()} codes; {core_count()} cores")
    print(
        f"C loop, one core {in_c * 1e3:.0f} ms; rasterising, one core {raster * 1e3:.0f} ms; whole {whole * 1e3:.0f} ms"
    )
    print(f"whole / C loop {whole / in_c:.2f}; whole / (C loop + rasterising) {whole / (in_c + raster):.2f}")


if __name__ == "__main__":
    main()
