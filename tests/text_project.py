"""A small project whose values are texts: kinds, a library and a graph, with every call of a node written down."""

from __future__ import annotations

import os
import time
from pathlib import Path
from typing import Any

from tangentry.pipeline.build import run_build
from tangentry.pipeline.graph import read_graph
from tangentry.pipeline.record import Record

KINDS = {
    "text.py": '''
from tangentry.pipeline.flow import Array, flow_value


@flow_value
class Text:
    """Words, and an array that nodes pass on."""

    words: str
    ballast: Array  # (any,) uint8


def note(log: str, kind: str, *seen: object) -> None:
    """Write down a call and all that it can tell of what it was given."""
    with open(log, "a") as file:
        file.write(f"{kind} {seen!r}\\n")
''',
    "take.py": '''
from typing import Literal

import numpy as np

from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import InputFile
from text import Text, note

VERSION = 1


def take(file: InputFile | str, *, if_missing: Literal["fail", "skip"] = "fail", log: str = "/dev/null") -> Text | None:
    """The words of a file, and those of the file beside it that its name and .side tell.

    if_missing  skip: leave it out
    """
    file = InputFile.of(file)
    words = file.bytes().tobytes().decode() if file.exists else None
    side = file.beside(file.stem + ".side")
    more = side.bytes().tobytes().decode() if side.exists else ""
    note(log, "take", VERSION, str(file), words, more, if_missing)
    if if_missing == "skip" and words is None:
        return None
    words = file.bytes().tobytes().decode()
    if words.startswith("broken"):
        raise InputError(file, "word 1", "it says broken", "write something else")
    if words.startswith("bug"):
        raise RuntimeError("a bug of the node's own")
    return Text(words + more, np.arange(20000, dtype=np.uint8))
''',
    "loud.py": '''
from dataclasses import replace

import helper
from text import Text, note

VERSION = 1


def loud(text: Text, other: Text | None = None, *, times: int = 1, log: str = "/dev/null") -> Text:
    """Louder words.

    times  how often they are said, at least 1
    """
    from deep import mark  # only now, as heavy things are imported

    more = "" if other is None else other.words
    note(log, "loud", VERSION, helper.VERSION, mark.VERSION, text.words, more, times)
    return replace(text, words=mark.marked(helper.raised(text.words + more) * times))
''',
    "helper.py": """
VERSION = 1


def raised(words: str) -> str:
    return words.upper()
""",
    "deep/__init__.py": "",
    "deep/mark.py": """
VERSION = 1


def marked(words: str) -> str:
    return words
""",
    "judge.py": '''
import numpy as np

from tangentry.pipeline.flow import Finding, Findings
from text import Text, note

VERSION = 1


def judge(text: Text, *, log: str = "/dev/null") -> Findings:
    """Rude words, if there are any."""
    note(log, "judge", VERSION, text.words)
    empty = np.zeros(0, np.int32)
    rude = Finding("rude", "fault", 1, "a rude word", "be polite", "", "", "", empty, empty.astype(np.float32), None)
    return Findings("", (rude,) if "RUDE" in text.words else (), {"words": len(text.words.split())})
''',
    "put.py": '''
import numpy as np

from tangentry.pipeline.flow import Files, Findings, OutFile, OutputFile
from text import Text, note

VERSION = 1


def put(
    text: Text, unless_faulty: Findings | None = None, *, file: OutputFile | str, log: str = "/dev/null"
) -> Files | None:
    """The words as a file."""
    judged = None if unless_faulty is None else (unless_faulty.faulty, unless_faulty.facts)
    note(log, "put", VERSION, text.words, judged, file)
    if unless_faulty is not None and unless_faulty.faulty:
        return None
    return Files((OutFile(file, np.frombuffer(text.words.encode(), np.uint8)),))
''',
    "join.py": '''
import numpy as np

from tangentry.pipeline.flow import Files, OutFile, OutputFile
from text import Text, note

VERSION = 1


def join(texts: dict[str, Text], *, file: OutputFile | str, log: str = "/dev/null") -> Files:
    """All words, in name order."""
    note(log, "join", VERSION, [(name, text.words) for name, text in texts.items()], file)
    said = "".join(f"{name}: {text.words}" for name, text in texts.items())
    return Files((OutFile(file, np.frombuffer(said.encode(), np.uint8)),))
''',
}
GRAPH = """\
tangentry: 1
about: words
library: props/*.txt
kinds: kinds
options: {out: made, times: 2}
per_asset:
  raw:     {node: take, file: "{file}", log: LOG}
  said:    {node: loud, text: raw, times: "{times}", log: LOG}
  verdict: {node: judge, text: said, log: LOG}
  done:    {node: put, text: said, unless_faulty: verdict, file: "{out}/{stem}.out", log: LOG}
whole_library:
  all:     {node: join, texts: said, file: "{out}/all.out", log: LOG}
"""


class Project:
    """A project in a folder."""

    def __init__(self, folder: Path) -> None:
        self.folder, self.graph = folder, folder / "graph.yaml"
        self.log = folder / "calls.log"
        for name, source in KINDS.items():
            self.write(f"kinds/{name}", source)
        for name in "abc":
            self.write(f"props/{name}.txt", f"hello {name}\n")
        self.write("graph.yaml", GRAPH.replace("LOG", str(self.log)))

    def write(self, path: str, text: str) -> Path:
        """Write a file of the project."""
        place = self.folder / path
        place.parent.mkdir(parents=True, exist_ok=True)
        place.write_text(text)
        return place

    def read(self, path: str) -> str:
        """Read a file of the project."""
        return (self.folder / path).read_text()

    def edit(self, path: str, old: str, new: str) -> None:
        """Change a file of the project."""
        text = self.read(path)
        assert old in text
        self.write(path, text.replace(old, new))

    def settle(self) -> None:
        """Let everything have been saved a minute ago: what was saved just now is distrusted."""
        for path in [self.folder, *self.folder.rglob("*")]:
            os.utime(path, (time.time() - 60,) * 2)

    def build(self, sets: dict[str, Any] | None = None, **more: Any) -> Record:
        """Build; `calls` then tells what ran."""
        self.log.write_text("")
        return run_build(read_graph(self.graph, sets), **more)

    @property
    def calls(self) -> list[str]:
        """The kinds that were called in the last build, sorted."""
        return sorted(call.split(" ", 1)[0] for call in self.seen)

    @property
    def seen(self) -> list[str]:
        """The node calls of the last build, each with all that it could see: arguments, file contents, source."""
        return self.log.read_text().splitlines()
