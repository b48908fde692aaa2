"""How long whole commands take, each beside something well known in the same run. Prints ratios.

python tests/benchmarks/builds.py            all
python tests/benchmarks/builds.py nothing    one: help, nothing, interrupt, workers, demo, large
"""

from __future__ import annotations

import os
import resource
import shutil
import signal
import statistics
import subprocess
import sys
import tempfile
import time
from collections.abc import Sequence
from pathlib import Path

ROOT = Path(__file__).parents[2]
sys.path.insert(0, str(ROOT / "tests"))

from shapes import torus  # noqa: E402
from tangentry.nodes.formats.obj_writing import write_obj  # noqa: E402
from tangentry.pipeline.start import start  # noqa: E402

TANGENTRY = str(Path(sys.executable).parent / "tangentry")
KIND = '''
import numpy as np

from tangentry.pipeline.flow import Files, InputFile, OutFile, OutputFile


def copy(file: InputFile | str, *, made: OutputFile | str) -> Files:
    """The file, as it is."""
    return Files((OutFile(made, InputFile.of(file).bytes()),))
'''
GRAPH = """
tangentry: 1
library: props/*.txt
kinds: kinds
per_asset:
  copied: {node: copy, file: "{file}", made: "build/{stem}.out"}
"""


def seconds(words: Sequence[str], cwd: Path | None = None) -> float:
    """Wall-clock time of a command."""
    began = time.perf_counter()
    subprocess.run(words, cwd=cwd, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, check=False)
    return time.perf_counter() - began


def pairs(first: Sequence[str], second: Sequence[str], cwd: Path | None = None, times: int = 11) -> tuple[float, float]:
    """Medians of two commands run in turn, after a warm-up."""
    found = [(seconds(first, cwd), seconds(second, cwd)) for _ in range(times + 1)][1:]
    return statistics.median(a for a, _ in found), statistics.median(b for _, b in found)


def peak_megabytes(words: Sequence[str]) -> tuple[float, float]:
    """Wall-clock time and peak memory of a command, measured by a process that runs nothing else."""
    script = (
        "import resource, subprocess, sys, time; t = time.perf_counter(); "
        "subprocess.run(sys.argv[1:], stdout=subprocess.DEVNULL); "
        "print(time.perf_counter() - t, resource.getrusage(resource.RUSAGE_CHILDREN).ru_maxrss)"
    )
    told = subprocess.run(
        [sys.executable, "-c", script, *words], capture_output=True, text=True, check=True
    ).stdout.split()
    return float(told[0]), float(told[1]) / 1024


def help_starts(_: Path) -> None:
    """--help beside the import of numpy."""
    ours, numpy = pairs([TANGENTRY, "--help"], [sys.executable, "-c", "import numpy"])
    beside = f"python -c 'import numpy' {numpy * 1e3:.0f} ms"
    print(f"help      tangentry --help {ours * 1e3:.0f} ms, {beside}: {ours / numpy:.2f}")


def nothing_changed(folder: Path) -> None:
    """A nothing-changed build of 10,000 small files beside git status of the same tree and bare Python."""
    _library(folder, 10_000)
    (folder / ".gitignore").write_text(".tangentry\n")
    build, status = [TANGENTRY, "build", "graph.yaml"], ["git", "status"]
    seconds(build, folder)
    for words in (
        ["init", "-q"],
        ["add", "-A"],
        ["-c", "user.name=bench", "-c", "user.email=bench@localhost", "commit", "-qm", "all"],
    ):
        seconds(["git", *words], folder)
    time.sleep(2.5)
    seconds(build, folder)
    ours, git = pairs(build, status, folder)
    bare = statistics.median(seconds([sys.executable, "-c", "pass"]) for _ in range(11))
    beside = f"git status {git * 1e3:.0f} ms, python {bare * 1e3:.0f} ms"
    print(f"nothing   build {ours * 1e3:.0f} ms, {beside}: (build - python) / git {(ours - bare) / git:.2f}")


def _library(folder: Path, count: int) -> None:
    for name in ("props", "kinds"):
        (folder / name).mkdir()
    for number in range(count):
        (folder / "props" / f"prop_{number:05}.txt").write_text(f"prop {number}\n")
    (folder / "kinds" / "copy.py").write_text(KIND)
    (folder / "graph.yaml").write_text(GRAPH)


def interrupt(folder: Path) -> None:
    """From Ctrl-C to the end of the process, while a node sleeps and while it computes without letting Python in."""
    _library(folder, 8)
    flag = folder / "flag"
    for what, work in (
        ("sleeps", "time.sleep(60)"),
        ("computes", "hashlib.pbkdf2_hmac('sha256', b'', b'', 100_000_000)"),
    ):
        body = f"    import hashlib, time\n    open({str(flag)!r}, 'w').close()\n    {work}\n    return Files("
        (folder / "kinds" / "copy.py").write_text(KIND.replace("    return Files(", body))
        for count in ("1", "2"):
            flag.unlink(missing_ok=True)
            words = [TANGENTRY, "build", "graph.yaml", "--workers", count]
            build = subprocess.Popen(words, cwd=folder, stderr=subprocess.DEVNULL, start_new_session=True)
            while not flag.exists():
                time.sleep(0.01)
            time.sleep(0.3)
            began = time.perf_counter()
            os.killpg(build.pid, signal.SIGINT)
            build.wait()
            took = time.perf_counter() - began
            print(
                f"interrupt a node {what}, workers {count}: ended after {took:.2f} s with exit code {build.returncode}"
            )


def workers(folder: Path) -> None:
    """One process beside two on 256 meshes of 20,000 triangles; and what two processes give a bare loop."""
    graph = _many_meshes(folder, 256)
    builds = [(_built(graph, "1"), _built(graph, "2")) for _ in range(3)]
    loops = [(_loops(1, 2), _loops(2, 1)) for _ in range(4)]
    one, two = (min(times) for times in zip(*builds, strict=True))
    print(f"workers   one process {one:.1f} s, two {two:.1f} s: {one / two:.2f} times as fast (best of 3)")
    loop_one, loop_two = (min(times) for times in zip(*loops, strict=True))
    print(f"          a bare loop in two processes: {loop_one / loop_two:.2f} times as fast (best of 4)")


def _built(graph: Path, count: str) -> float:
    for place in (".tangentry", "build"):
        shutil.rmtree(graph.parent / place, ignore_errors=True)
    began = time.perf_counter()
    subprocess.run([TANGENTRY, "build", str(graph), "--workers", count], stdout=subprocess.DEVNULL, check=True)
    return time.perf_counter() - began


def _loops(processes: int, times: int) -> float:
    """Wall-clock time of a loop that only counts, so often in each of so many processes at once."""
    code = f"for _ in range({times}):\n    for i in range(10_000_000): pass"
    began = time.perf_counter()
    for one in [subprocess.Popen([sys.executable, "-c", code]) for _ in range(processes)]:
        one.wait()
    return time.perf_counter() - began


def _many_meshes(folder: Path, count: int) -> Path:
    (folder / "props").mkdir()
    for file in write_obj(torus(100, 100), "torus"):
        for number in range(count):
            file.content.tofile(folder / "props" / file.name.replace("torus.obj", f"torus_{number:03}.obj"))
    return _starter(folder)


def _starter(folder: Path) -> Path:
    """The graph that `tangentry start` writes, for whatever lies in a folder's props."""
    start(folder / "project")
    shutil.copy(folder / "project" / "library.yaml", folder / "library.yaml")
    return folder / "library.yaml"


def demo(folder: Path) -> None:
    """The demo library: a first build, and one with nothing changed."""
    shutil.copytree(
        ROOT / "graphs" / "ferry_terminal", folder / "demo", ignore=shutil.ignore_patterns("build", ".tangentry")
    )
    build = [TANGENTRY, "build", str(folder / "demo" / "ferry_terminal.yaml")]
    first, memory = peak_megabytes(build)
    time.sleep(2.5)
    seconds(build)
    again, memory_again = peak_megabytes(build)
    then = f"nothing changed {again * 1e3:.0f} ms, {memory_again:.0f} MB"
    print(f"demo      first build {first:.2f} s, {memory:.0f} MB; {then}")


def large(folder: Path) -> None:
    """One OBJ of 1,000,000 triangles, load to export."""
    (folder / "props").mkdir()
    for file in write_obj(torus(1000, 500), "torus"):
        file.content.tofile(folder / "props" / file.name)
    build = [TANGENTRY, "build", str(_starter(folder))]
    took, memory = peak_megabytes(build)
    size = sum(path.stat().st_size for path in (folder / "props").iterdir()) / 1e6
    print(f"large     {size:.0f} MB of OBJ, 1,000,000 triangles, load to export: {took:.1f} s, {memory:.0f} MB")


BENCHMARKS = {
    "help": help_starts,
    "nothing": nothing_changed,
    "interrupt": interrupt,
    "workers": workers,
    "demo": demo,
    "large": large,
}


if __name__ == "__main__":
    os.environ.setdefault("PYTHONHASHSEED", "0")
    resource.setrlimit(resource.RLIMIT_NOFILE, (4096, 4096))
    for name in sys.argv[1:] or BENCHMARKS:
        with tempfile.TemporaryDirectory() as folder:
            BENCHMARKS[name](Path(folder))
