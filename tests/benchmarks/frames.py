"""Solving tangent frames beside plain loops in C, by angle and by the MikkTSpace scheme.

Run by hand: python tests/benchmarks/frames.py. Needs a C compiler; prints ratios of the best of several runs, for
meshes of 100,000 to 4,000,000 triangles and for triangles in random order, and the peak of memory in sizes of the mesh.

The loops in C are straightforward: float32, one vertex after another, tables by open hashing. The first adds up
tangents and bitangents by angle on an indexed mesh. The second starts from three arrays of corners and joins equal
corners, finds the groups around each vertex, and adds up by the angle in the plane of the normal.
"""

from __future__ import annotations

import ctypes
import os
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).parents[1]))
from shapes import torus_part, triangulated
from tangentry.nodes.geometry.frames import solve_frames
from tangentry.nodes.geometry.vectors import angle_between
from tangentry.nodes.model import Part, Stream

SIZES = {"100 k": (250, 200), "1 M": (1000, 500), "4 M": (2000, 1000)}
SOURCE = r"""
#include <math.h>
#include <stdint.h>
#include <stdlib.h>
#include <string.h>

typedef struct { float x, y, z; } vec;
static vec minus(vec a, vec b) { return (vec){a.x - b.x, a.y - b.y, a.z - b.z}; }
static vec mix(vec a, float s, vec b, float t) {
  return (vec){a.x * s + b.x * t, a.y * s + b.y * t, a.z * s + b.z * t};
}
static float dot(vec a, vec b) { return a.x * b.x + a.y * b.y + a.z * b.z; }
static vec unit(vec a) { float l = sqrtf(dot(a, a)); return l > 0 ? mix(a, 1 / l, a, 0) : (vec){0, 0, 0}; }
static vec cross(vec a, vec b) { return (vec){a.y * b.z - a.z * b.y, a.z * b.x - a.x * b.z, a.x * b.y - a.y * b.x}; }
static float angle(vec a, vec b) {
  float l = sqrtf(dot(a, a) * dot(b, b));
  return l > 0 ? acosf(fmaxf(-1, fminf(1, dot(a, b) / l))) : 0;
}
static int directions(vec p0, vec p1, vec p2, const float *q0, const float *q1, const float *q2, vec *t, vec *b) {
  vec d1 = minus(p1, p0), d2 = minus(p2, p0);
  float u1 = q1[0] - q0[0], v1 = q1[1] - q0[1], u2 = q2[0] - q0[0], v2 = q2[1] - q0[1];
  float det = u1 * v2 - u2 * v1;
  if (!(fabsf(det) > 1.17549435e-38f)) return 0;
  float side = det > 0 ? 1 : -1;
  *t = unit(mix(d1, v2 * side, d2, -v1 * side));
  *b = unit(mix(d2, u1 * side, d1, -u2 * side));
  return (int)side;
}

void by_angle(const int32_t *index, long count, const vec *p, const vec *n, const float *uv, long vertices,
              vec *tangent, vec *bitangent, int8_t *side) {
  memset(tangent, 0, vertices * sizeof(vec));
  memset(bitangent, 0, vertices * sizeof(vec));
  for (long i = 0; i < count; i++) {
    const int32_t *c = index + 3 * i;
    vec t, b;
    if (!directions(p[c[0]], p[c[1]], p[c[2]], uv + 2 * c[0], uv + 2 * c[1], uv + 2 * c[2], &t, &b)) continue;
    for (int k = 0; k < 3; k++) {
      int32_t v = c[k];
      float w = angle(minus(p[c[(k + 1) % 3]], p[v]), minus(p[c[(k + 2) % 3]], p[v]));
      tangent[v] = mix(tangent[v], 1, t, w);
      bitangent[v] = mix(bitangent[v], 1, b, w);
    }
  }
  for (long v = 0; v < vertices; v++) {
    tangent[v] = unit(tangent[v]);
    bitangent[v] = unit(bitangent[v]);
    side[v] = dot(cross(n[v], tangent[v]), bitangent[v]) < 0 ? -1 : 1;
  }
}

static uint64_t hash(const vec *p, const vec *n, const float *uv) {
  uint32_t key[8];
  memcpy(key, p, 12); memcpy(key + 3, n, 12); memcpy(key + 6, uv, 8);
  uint64_t h = 0;
  for (int k = 0; k < 8; k++) { h = (h ^ key[k]) * 0x9E3779B97F4A7C15ull; h ^= h >> 29; }
  return h;
}

long by_scheme(long count, const vec *p, const vec *n, const float *uv, int32_t *group, vec *tangent, int8_t *side) {
  long corners = 3 * count, size = 16, vertices = 0, groups = 0, widest = 0;
  while (size < 2 * corners) size *= 2;
  int32_t *slots = malloc(size * 4), *vertex = malloc(corners * 4), *first = malloc(corners * 4);
  memset(slots, -1, size * 4);
  for (long c = 0; c < corners; c++) {
    uint64_t slot = hash(p + c, n + c, uv + 2 * c) & (size - 1);
    while (slots[slot] >= 0) {
      long o = slots[slot];
      if (!memcmp(p + o, p + c, 12) && !memcmp(n + o, n + c, 12) && !memcmp(uv + 2 * o, uv + 2 * c, 8)) break;
      slot = (slot + 1) & (size - 1);
    }
    if (slots[slot] < 0) { slots[slot] = c; vertex[c] = vertices; first[vertices++] = c; }
    else vertex[c] = vertex[slots[slot]];
  }
  free(slots);
  vec *face = malloc(count * sizeof(vec)), ignored;
  int8_t *seen_from = malloc(count);
  int32_t *starts = calloc(vertices + 2, 4), *ring = malloc(corners * 4);
  for (long t = 0; t < count; t++) {
    face[t] = (vec){0, 0, 0};
    const float *q = uv + 6 * t;
    seen_from[t] = directions(p[3 * t], p[3 * t + 1], p[3 * t + 2], q, q + 2, q + 4, face + t, &ignored);
  }
  for (long c = 0; c < corners; c++) starts[vertex[c] + 2]++;
  for (long v = 0; v < vertices; v++) {
    if (starts[v + 2] > widest) widest = starts[v + 2];
    starts[v + 2] += starts[v + 1];
  }
  for (long c = 0; c < corners; c++) ring[starts[vertex[c] + 1]++] = c;
  int32_t *parent = malloc(widest * 4 + 4);
  for (long v = 0; v < vertices; v++) {
    int32_t *r = ring + starts[v];
    int k = starts[v + 1] - starts[v];
    for (int i = 0; i < k; i++) parent[i] = i;
    for (int i = 0; i < k; i++) {
      int32_t t = r[i] / 3, after = vertex[3 * t + (r[i] + 1) % 3];
      for (int j = 0; j < k; j++) {
        int32_t s = r[j] / 3;
        if (vertex[3 * s + (r[j] + 2) % 3] != after || seen_from[s] != seen_from[t]) continue;
        int a = i, b = j;
        while (parent[a] != a) a = parent[a];
        while (parent[b] != b) b = parent[b];
        if (a < b) parent[b] = a; else parent[a] = b;
      }
    }
    for (int i = 0; i < k; i++) {
      int32_t c = r[i], t = c / 3;
      int a = i;
      while (parent[a] != a) a = parent[a];
      if (a == i) { tangent[groups] = (vec){0, 0, 0}; side[groups] = seen_from[t]; group[c] = groups++; }
      else group[c] = group[r[a]];
      vec m = n[c], before = minus(p[3 * t + (c + 2) % 3], p[c]), after = minus(p[3 * t + (c + 1) % 3], p[c]);
      before = mix(before, 1, m, -dot(before, m));
      after = mix(after, 1, m, -dot(after, m));
      vec laid = unit(mix(face[t], 1, m, -dot(face[t], m)));
      tangent[group[c]] = mix(tangent[group[c]], 1, laid, angle(before, after));
    }
  }
  for (long g = 0; g < groups; g++) tangent[g] = unit(tangent[g]);
  free(vertex); free(first); free(face); free(seen_from); free(starts); free(ring); free(parent);
  return groups;
}
"""


def compiled(source: str) -> ctypes.CDLL:
    """The C source as a library, -O3 for this machine."""
    folder = Path(tempfile.mkdtemp())
    (folder / "loop.c").write_text(source)
    words = ["gcc", "-O3", "-march=native", "-shared", "-fPIC", "-o", str(folder / "loop.so"), str(folder / "loop.c")]
    subprocess.run([*words, "-lm", "-w"], check=True)
    return ctypes.CDLL(str(folder / "loop.so"))


def best(*calls: Callable[[], object], runs: int) -> list[float]:
    """Seconds of the quickest of several runs of each call, in turn, after one to warm up."""
    taken: list[list[float]] = [[] for _ in calls]
    for _ in range(runs + 1):
        for call, seconds in zip(calls, taken, strict=True):
            start = time.perf_counter()
            call()
            seconds.append(time.perf_counter() - start)
    return [min(seconds[1:]) for seconds in taken]


def indexed(part: Part) -> Part:
    """The part as glTF holds it: a row of every stream for each vertex, one index for all."""
    index = part.uvs[0].index
    corner = np.zeros(len(part.uvs[0].values), np.int32)
    corner[index] = np.arange(len(index))
    return over(part, corner, index)


def soup(part: Part) -> Part:
    """The part with rows of its own for every corner."""
    corner = np.arange(part.corner_count, dtype=np.int32)
    return over(part, corner, corner)


def shuffled(part: Part) -> Part:
    """The part with its triangles in random order."""
    order = np.random.default_rng(0).permutation(part.face_count)
    corner = (3 * order[:, None] + np.arange(3)).ravel()
    streams = [Stream(stream.values, stream.index[corner]) for stream in (part.points, part.normals, part.uvs[0])]
    return replace(part, points=streams[0], normals=streams[1], uvs=(streams[2],))


def over(part: Part, corner: np.ndarray, index: np.ndarray) -> Part:
    """Rows taken at some corners, under a new index."""
    streams = [
        Stream(np.ascontiguousarray(one.values[one.index[corner]]), index)
        for one in (part.points, part.normals, part.uvs[0])
    ]
    return replace(part, points=streams[0], normals=streams[1], uvs=(streams[2],))


def address(array: np.ndarray) -> ctypes.c_void_p:
    """Where C finds an array."""
    return ctypes.c_void_p(array.ctypes.data)


def beside(library: ctypes.CDLL, part: Part, method: str) -> tuple[float, float, float]:
    """(seconds of C, seconds of solve_frames, greatest angle between their tangents) for a part of triangles.

    Both take fresh memory for what they make: pages that are touched for the first time cost either as much.
    """
    count, rows = part.face_count, len(part.points.values)
    values = [address(stream.values) for stream in (part.points, part.normals, part.uvs[0])]
    size, vertices = ctypes.c_long(count), ctypes.c_long(rows)

    def plain() -> tuple[np.ndarray, np.ndarray]:
        tangent, side = np.empty((rows, 3), np.float32), np.empty(rows, np.int8)
        if method == "angle":
            bitangent = np.empty((rows, 3), np.float32)
            out = (address(tangent), address(bitangent), address(side))
            library.by_angle(address(part.points.index), size, *values, vertices, *out)
            return tangent, part.points.index
        group = np.empty(3 * count, np.int32)
        library.by_scheme(size, *values, address(group), address(tangent), address(side))
        return tangent, group

    runs = max(7, 5_000_000 // count)  # short ones more often: others may be at work on the machine
    seconds = best(plain, lambda: solve_frames(part, part.uvs[0], 0, False, method), runs=runs)
    tangent, group = plain()
    made = solve_frames(part, part.uvs[0], 0, False, method)
    return *seconds, float(angle_between(tangent[group], made.tangents[made.index]).max())


def compare() -> None:
    """Print the ratios."""
    library = compiled(SOURCE)
    for title, order in (("in order", lambda part: part), ("random order", shuffled)):
        for name, cells in SIZES.items():
            part = order(triangulated(torus_part(*cells)))
            for method, given in (("angle", indexed(part)), ("mikktspace", soup(part))):
                plain, ours, apart = beside(library, given, method)
                print(
                    f"{name:>6} triangles {title:12}  {method:10}  C {1e3 * plain:6.1f} ms  here {1e3 * ours:6.1f} ms"
                    f"  ratio {ours / plain:.2f}  per triangle {1e9 * ours / part.face_count:.0f} ns"
                    f"  at most {apart:.3f} degrees apart",
                    flush=True,
                )


def memory() -> None:
    """Print the peak of memory over that of the mesh; in a process of its own, since a peak never falls."""
    method, layout = sys.argv[2:]
    small = {"indexed": indexed, "soup": soup, "streams": lambda part: part}[layout]
    warm = small(triangulated(torus_part(20, 10)))
    solve_frames(warm, warm.uvs[0], 0, False, method)
    part = small(triangulated(torus_part(*SIZES["1 M"])))
    arrays = {id(one): one.nbytes for s in (part.points, part.normals, part.uvs[0]) for one in (s.values, s.index)}
    before = int(Path("/proc/self/statm").read_text().split()[1]) * resource.getpagesize()
    Path("/proc/self/clear_refs").write_text("5")
    solve_frames(part, part.uvs[0], 0, False, method)
    status = dict(line.split(":", 1) for line in Path("/proc/self/status").read_text().splitlines())
    peak = int(status["VmHWM"].split()[0]) * 1024
    own = sum(arrays.values()) + part.starts.nbytes
    print(f"{method:10} {layout:8} mesh {own / 1e6:.0f} MB, peak above it {(peak - before) / own:.2f} times the mesh")


if __name__ == "__main__":
    if "memory" in sys.argv[1:2]:
        memory()
    else:
        compare()
        for method in ("angle", "mikktspace"):
            for layout in ("indexed", "streams", "soup"):
                # Every array in a mapping of its own: memory that earlier ones left behind would hide the need for it.
                own = os.environ | {"MALLOC_MMAP_THRESHOLD_": "65536"}
                subprocess.run([sys.executable, __file__, "memory", method, layout], check=True, env=own)
