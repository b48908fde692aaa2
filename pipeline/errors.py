"""What can go wrong, in three kinds; the first two are the user's to mend and never show a traceback.

TangentryError
├── GraphError    the graph file or the call is wrong: file:line:column, what was found, what was possible
├── InputError    an input file is wrong: file, element, value, what to do
└── NodeError     a node failed through its own fault; the cause is chained
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable

LONGEST = 500  # characters of a stranger's message


class TangentryError(Exception):
    """Anything this package raises on purpose."""


class GraphError(TangentryError):
    """The graph file or the call is wrong; carries every problem found, one line each."""

    def __init__(self, *problems: str) -> None:
        self.problems = problems
        super().__init__("\n".join(problems))


class InputError(TangentryError):
    """An input file can't be used: which file, where in it, what was found, what to do.

    >>> str(InputError("props/crate.obj", "line 12", "vertex index 99, but the file has 8 positions", "export it
    again")) 'props/crate.obj: line 12: vertex index 99, but the file has 8 positions; export it again'
    """

    def __init__(self, file: object, element: str, found: str, advice: str = "") -> None:
        self.file, self.element, self.found, self.advice = str(file), element, found, advice
        place = f"{self.file}: {element}" if element else self.file
        super().__init__(f"{place}: {found}; {advice}" if advice else f"{place}: {found}")


class NodeError(TangentryError):
    """A node failed through its own fault."""


def one_line(error: BaseException) -> str:
    """What a stranger's exception says, in one line of reasonable length.

    >>> one_line(ValueError("first\\n  second"))
    'ValueError: first second'
    """
    text = f"{type(error).__name__}: {' '.join(str(error).split())}"
    return text if len(text) <= LONGEST else text[: LONGEST - 3] + "..."


def nearest(found: str, possible: Iterable[str]) -> str:
    """The end of an error line: the likeliest word meant, or nothing.

    >>> nearest("frmaes", ["frames", "load"])
    ' Did you mean "frames"?'
    """
    guesses = difflib.get_close_matches(found, list(possible), n=1, cutoff=0.5)
    return f' Did you mean "{guesses[0]}"?' if guesses else ""
