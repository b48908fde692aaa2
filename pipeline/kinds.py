"""What a node kind is: a function in a file of its name, whose signature is the schema.

    nodes/weld.py:  def weld(asset: Asset, *, within: float = 0.0) -> Asset
                             input            setting                 output

Finding a kind (homes.py) reads file names; importing one runs its code.
"""

from __future__ import annotations

import dataclasses
import inspect
import json
import re
import types
import typing
from collections.abc import Callable, Mapping, Sequence
from functools import cached_property
from pathlib import Path
from typing import Any

from tangentry.pipeline.errors import GraphError, nearest, one_line
from tangentry.pipeline.flow import InputFile, OutputFile
from tangentry.pipeline.homes import Home, Source, installed_homes, project_home

REQUIRED: Any = inspect.Parameter.empty


@dataclasses.dataclass(frozen=True)
class Input:
    """A flow value that a kind takes."""

    name: str
    flow: type
    optional: bool  # None where it is left out
    many: type | None = None  # dict, tuple or list: takes the values of all assets


@dataclasses.dataclass(frozen=True)
class Setting:
    """A plain value that a kind takes."""

    name: str
    annotation: Any
    default: Any  # REQUIRED where there is none
    about: str
    file: str = ""  # "read": names an input file; "made": names a file to be made

    @cached_property
    def _adapter(self) -> Any:
        from pydantic import TypeAdapter

        return TypeAdapter(str if self.file else self.annotation)

    def schema(self) -> dict[str, Any]:
        """The JSON Schema of the setting's values."""
        schema: dict[str, Any] = self._adapter.json_schema()
        if self.default is not REQUIRED and not self.file:
            schema["default"] = json.loads(self._adapter.dump_json(self.default))
        return schema | {"description": self.about} if self.about else schema

    def read(self, value: Any) -> Any:
        """The value as the function takes it. Raises ValueError saying what was expected and what was found."""
        from pydantic import ValidationError

        if self.file and value is None and self.default is None:
            return None
        try:
            return self._adapter.validate_json(json.dumps(value), strict=True)
        except ValidationError as error:
            first = error.errors()[0]
            place = "".join(
                f"[{part!r}]"
                for part in first["loc"]
                if isinstance(part, int) or not str(part).startswith(("function-", "literal["))
            )
            reason = first["msg"] if first["type"] not in PLAIN_FAULTS else ""
            expected = f"expects {in_words(self.annotation)}" + (f" ({reason})" if reason else "")
            guess = _literal_guess(value, self.annotation)
            raise ValueError(f"{expected}; found {show(value)}{' at ' + place if place else ''}.{guess}") from None

    def plain(self, value: Any) -> Any:
        """A value, as `read` gave it, in JSON's types."""
        return self._adapter.dump_python(value, mode="json")


PLAIN_FAULTS = {
    "float_type",
    "int_type",
    "bool_type",
    "string_type",
    "literal_error",
    "tuple_type",
    "list_type",
    "dict_type",
    "int_from_float",
    "missing",
}


@dataclasses.dataclass(frozen=True)
class Kind:
    """A node kind: its function, what it takes and what it gives."""

    name: str
    about: str  # the docstring
    function: Callable[..., Any]
    inputs: dict[str, Input]
    settings: dict[str, Setting]
    outputs: dict[str, type]  # by name; a lone output is called ""
    may_skip: frozenset[str]  # the outputs that may be left out (None)
    source: Source
    home: Path  # the file it lives in

    @property
    def line(self) -> str:
        """The first line of the docstring."""
        return self.about.splitlines()[0] if self.about else ""


class Kinds:
    """Every kind at hand, by name. Its modules are of one time: changes of source count from the next Kinds on."""

    def __init__(self, project: Path | None = None) -> None:
        self._where: dict[str, tuple[Home, Path]] = {}
        self._loaded: dict[str, Kind] = {}
        for home in [*installed_homes(), *([] if project is None else [project_home(project)])]:
            home.refresh()
            for name, path in home.files().items():
                if name in self._where:
                    raise GraphError(
                        f'{path}: kind "{name}" is also defined in {self._where[name][1]}; rename one of them'
                    )
                self._where[name] = (home, path)

    @property
    def names(self) -> list[str]:
        """The names of all kinds, sorted."""
        return sorted(self._where)

    def get(self, name: str) -> Kind:
        """The kind of that name. Raises GraphError where there is none, or where its file can't be used."""
        if name not in self._loaded:
            if name not in self._where:
                raise GraphError(
                    f'there is no node kind "{name}"; there are {", ".join(self.names)}.{nearest(name, self.names)}'
                )
            home, path = self._where[name]
            self._loaded[name] = _read_kind(name, home, path)
        return self._loaded[name]


def _read_kind(name: str, home: Home, path: Path) -> Kind:
    source = home.source(path)
    try:
        function = home.load(path)
    except (Exception, SystemExit) as error:  # whatever a stranger's module does on import, the graph can't use it
        raise GraphError(f"{path}: can't be imported: {one_line(error)}") from error
    return kind_of(function, path, source)


def kind_of(function: Callable[..., Any], home: Path, source: Source) -> Kind:
    """The kind that a function is; `home` is the file it lives in. Raises GraphError where it can't be a schema."""
    try:
        hints = typing.get_type_hints(function, include_extras=True)
    except Exception as error:  # an annotation may be any expression
        raise GraphError(f"{home}: {function.__name__}: its annotations can't be read: {one_line(error)}") from error
    about = inspect.getdoc(function) or ""
    inputs, settings = {}, {}
    for name, parameter in inspect.signature(function).parameters.items():
        annotation = hints.get(name)
        if annotation is None:
            raise GraphError(f'{home}: {function.__name__}: parameter "{name}" has no type')
        if name == "node":
            raise GraphError(f'{home}: {function.__name__}: a parameter can\'t be called "node"')
        file = _file_role(annotation)
        if file or parameter.kind is parameter.KEYWORD_ONLY:
            settings[name] = Setting(name, annotation, parameter.default, _about(about, name), file)
        else:
            inputs[name] = _input(name, annotation, parameter)
    outputs, may_skip = _outputs(function, hints, home)
    return Kind(function.__name__, about, function, inputs, settings, outputs, may_skip, source, home)


def _about(docstring: str, name: str) -> str:
    """What a docstring's line on a setting says, its indented continuation lines included."""
    lines = docstring.splitlines()
    for number, line in enumerate(lines):
        found = re.match(rf"(\s*){re.escape(name)}\s\s+(.*)", line)
        if found:
            words = [found[2]]
            for more in lines[number + 1 :]:
                if not more.strip() or len(more) - len(more.lstrip()) <= len(found[1]) + 4:
                    break
                words.append(more.strip())
            return " ".join(words).strip()
    return ""


def _members(annotation: Any) -> tuple[Any, ...]:
    if typing.get_origin(annotation) in (types.UnionType, typing.Union):
        return typing.get_args(annotation)
    return (annotation,)


def _file_role(annotation: Any) -> str:
    members = _members(annotation)
    return "read" if InputFile in members else "made" if OutputFile in members else ""


def _input(name: str, annotation: Any, parameter: inspect.Parameter) -> Input:
    members = [member for member in _members(annotation) if member is not type(None)]
    optional = parameter.default is None
    origin, inner = typing.get_origin(members[0]), typing.get_args(members[0])
    if origin in (dict, Mapping):
        return Input(name, inner[1], optional, dict)
    if origin in (tuple, list, Sequence):
        return Input(name, inner[0], optional, list if origin is list else tuple)
    return Input(name, members[0], optional)


def _outputs(function: Callable[..., Any], hints: dict[str, Any], home: Path) -> tuple[dict[str, type], frozenset[str]]:
    """The outputs by name, and the names of those that may be None."""
    if "return" not in hints:
        raise GraphError(f"{home}: {function.__name__}: its output has no type")
    members = _members(hints["return"])
    only = next((member for member in members if member is not type(None)), type(None))
    named = {"": hints["return"]}
    if isinstance(only, type) and issubclass(only, tuple) and hasattr(only, "_fields"):
        named = typing.get_type_hints(only)
    outputs: dict[str, type] = {}
    for name, annotation in named.items():
        kind = next((member for member in _members(annotation) if member is not type(None)), type(None))
        if not dataclasses.is_dataclass(kind):
            raise GraphError(
                f"{home}: {function.__name__}: its output must be a flow value, not {getattr(kind, '__name__', kind)}"
            )
        outputs[name] = kind
    return outputs, frozenset(name for name, annotation in named.items() if type(None) in _members(annotation))


def in_words(annotation: Any) -> str:
    """What values an annotation takes, for people.

    >>> in_words(float), in_words(typing.Literal["up", "down"]), in_words(float | None)
    ('a number', '"up" or "down"', 'a number or nothing')
    """
    origin, inner = typing.get_origin(annotation), typing.get_args(annotation)
    if _file_role(annotation):
        return "a path"
    if origin is typing.Annotated:
        return in_words(inner[0])
    if origin is typing.Literal:
        return " or ".join(show(choice) for choice in inner)
    if origin in (types.UnionType, typing.Union):
        return " or ".join(in_words(member) for member in inner)
    if origin in (tuple, list, Sequence):
        if origin is tuple and inner and inner[-1] is not Ellipsis:
            return f"a list of {len(inner)}: " + ", ".join(in_words(member) for member in inner)
        return f"a list, each {in_words(inner[0])}"
    if origin in (dict, Mapping):
        return f"a mapping of {in_words(inner[0])} to {in_words(inner[1])}"
    names = {float: "a number", int: "a whole number", bool: "true or false", str: "text", type(None): "nothing"}
    return names.get(annotation, getattr(annotation, "__name__", str(annotation)))


def show(value: Any) -> str:
    """A value as an error line quotes it, cut where it is long."""
    if value is None:
        return "nothing"
    text = json.dumps(value, ensure_ascii=False, default=str)
    return text if len(text) <= 80 else text[:77] + "..."


def _literal_guess(value: Any, annotation: Any) -> str:
    choices = [
        str(choice)
        for member in _members(annotation)
        if typing.get_origin(member) is typing.Literal
        for choice in typing.get_args(member)
    ]
    return nearest(str(value), choices)
