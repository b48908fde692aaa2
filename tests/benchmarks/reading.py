"""Reading: an OBJ of 1,000,000 triangles beside a plain parser in C over the same bytes, a GLB beside copying it.

Run by hand: python tests/benchmarks/reading.py. Needs a C compiler; prints ratios of the best of several runs.
"""

from __future__ import annotations

import ctypes
import sys
import tempfile
from pathlib import Path

import numpy as np

sys.path[:0] = [str(Path(__file__).parents[1]), str(Path(__file__).parent)]

from raster import best, compiled  # noqa: E402
from shapes import asset, torus_part, triangulated  # noqa: E402
from tangentry.nodes.formats.gltf import read_gltf, write_gltf  # noqa: E402
from tangentry.nodes.formats.obj import read_obj  # noqa: E402
from tangentry.nodes.formats.obj_scan import read_statements  # noqa: E402
from tangentry.nodes.formats.obj_writing import write_obj  # noqa: E402
from tangentry.nodes.formats.ply import read_ply  # noqa: E402
from tangentry.nodes.formats.ply_writing import write_ply  # noqa: E402
from tangentry.nodes.frames import frames  # noqa: E402
from tangentry.pipeline.flow import InputFile  # noqa: E402

COLUMNS, ROWS = 1000, 500  # quads of a torus, written as 2 triangles each
SOURCE = r"""
#include <stdint.h>
static const double tens[] = {1, 1e1, 1e2, 1e3, 1e4, 1e5, 1e6, 1e7, 1e8, 1e9, 1e10, 1e11, 1e12, 1e13, 1e14, 1e15, 1e16,
                              1e17, 1e18, 1e19, 1e20, 1e21, 1e22};
static const char *number(const char *s, float *out) {
  while (*s == ' ') s++;
  int negative = *s == '-';
  s += negative;
  int64_t mantissa = 0;
  int exponent = 0;
  while (*s >= '0' && *s <= '9') mantissa = mantissa * 10 + (*s++ - '0');
  if (*s == '.') {
    const char *point = ++s;
    while (*s >= '0' && *s <= '9') mantissa = mantissa * 10 + (*s++ - '0');
    exponent = (int)(point - s);
  }
  if (*s == 'e' || *s == 'E') {
    s++;
    int down = *s == '-', power = 0;
    s += *s == '-' || *s == '+';
    while (*s >= '0' && *s <= '9') power = power * 10 + (*s++ - '0');
    exponent += down ? -power : power;
  }
  double value = (double)mantissa;
  while (exponent < -22) value /= 1e22, exponent += 22;
  value = exponent < 0 ? value / tens[-exponent] : value * tens[exponent];
  *out = (float)(negative ? -value : value);
  return s;
}
static const char *whole(const char *s, int32_t *out) {
  int32_t value = 0;
  while (*s >= '0' && *s <= '9') value = value * 10 + (*s++ - '0');
  *out = value - 1;
  return s;
}
/* Triangles v/vt/vn; arrays are large enough. */
long parse(const char *s, const char *end, float *v, float *vt, float *vn, int32_t *corners) {
  long count = 0;
  while (s < end) {
    if (s[0] == 'v' && s[1] == ' ') {
      s += 2;
      for (int k = 0; k < 3; k++) s = number(s, v++);
    } else if (s[0] == 'v' && s[1] == 't') {
      s += 3;
      for (int k = 0; k < 2; k++) s = number(s, vt++);
    } else if (s[0] == 'v' && s[1] == 'n') {
      s += 3;
      for (int k = 0; k < 3; k++) s = number(s, vn++);
    } else if (s[0] == 'f') {
      s++;
      for (int k = 0; k < 3; k++) {
        s++;
        s = whole(s, corners++) + 1;
        s = whole(s, corners++) + 1;
        s = whole(s, corners++);
      }
      count++;
    }
    while (*s != '\n') s++;
    s++;
  }
  return count;
}
"""


def main() -> None:
    """Print the ratios."""
    shape = asset(triangulated(torus_part(COLUMNS, ROWS)))
    with tempfile.TemporaryDirectory() as folder:
        _obj(shape, Path(folder))
        _ply(shape, Path(folder))
        _glb(shape, Path(folder))


def _file(folder: Path, name: str, content: np.ndarray) -> Path:
    (folder / name).write_bytes(content.tobytes())
    return folder / name


def _obj(shape: object, folder: Path) -> None:
    path = _file(folder, "torus.obj", write_obj(shape, "torus")[0].content)
    text = np.fromfile(path, np.uint8)
    lines = text.tobytes().count(b"\nf ")
    room = [np.zeros((1 << 21, width), np.float32) for width in (3, 2, 3)]
    corners = np.zeros((3 << 20, 3), np.int32)
    pointers = [array.ctypes.data_as(ctypes.c_void_p) for array in (*room, corners)]
    library = compiled(SOURCE)
    library.parse.restype = ctypes.c_long
    start = text.ctypes.data
    ends = ctypes.c_void_p(start), ctypes.c_void_p(start + len(text))
    in_c = best(lambda: library.parse(*ends, *pointers))

    file = InputFile(path)
    file.bytes()
    statements = best(lambda: read_statements(file))
    here = best(lambda: read_obj(file))
    found = read_statements(file)
    assert (found.corners == corners[: 3 * lines].T).all() and (found.points == room[0][: len(found.points)]).all()
    print(
        f"OBJ, {lines:,} faces, {len(text) / 1e6:.0f} MB: C {in_c * 1e3:.0f} ms ({len(text) / in_c / 1e9:.2f} GB/s),"
        f" statements {statements * 1e3:.0f} ms, whole asset {here * 1e3:.0f} ms, ratio {here / in_c:.2f}"
    )


def _ply(shape: object, folder: Path) -> None:
    path = _file(folder, "torus.ply", write_ply(shape, "torus")[0].content)
    file = InputFile(path)
    content = file.bytes()
    copied, here = best(lambda: content.copy()), best(lambda: read_ply(file))
    print(f"PLY, {len(content) / 1e6:.0f} MB: copy {copied * 1e3:.1f} ms, whole asset {here * 1e3:.0f} ms")


def _glb(shape: object, folder: Path) -> None:
    path = _file(folder, "torus.glb", write_gltf(frames(shape, where="all"), None, "torus.glb")[0].content)
    file = InputFile(path)
    content = file.bytes()
    copied, here = best(lambda: content.copy()), best(lambda: read_gltf(file))
    print(
        f"GLB, {len(content) / 1e6:.0f} MB: copy {copied * 1e3:.1f} ms, whole asset {here * 1e3:.1f} ms,"
        f" ratio {here / copied:.2f}"
    )


if __name__ == "__main__":
    main()
