"""glTF 2.0 files from outside: JSON or GLB, with the buffers and images they name (specification, 3.6 and 4)."""

from __future__ import annotations

import base64
import binascii
import json
import math
import re
from typing import Any
from urllib.parse import unquote, unquote_to_bytes

import numpy as np
from tangentry.nodes.formats.gltf_shape import check_shape
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Array, InputFile

MAGIC, JSON_CHUNK, BIN_CHUNK = 0x46546C67, 0x4E4F534A, 0x004E4942
DATA_URI = re.compile(r"data:([^;,]*)((?:;[^;,]*)*?)(;base64)?,", re.I)
LONE_SURROGATE = re.compile(rb"\\u[dD][89a-fA-F]")  # or one of a pair
DEEPEST = 256  # levels of JSON: what is walked or written needs as many calls
SCHEME = re.compile(r"[A-Za-z][A-Za-z0-9+.-]+:")
EXPORT_AGAIN = "export the file again"


def read_container(file: InputFile) -> tuple[dict[str, Any], list[Array]]:
    """A file's JSON, its shape checked, and its buffers, each (size,) uint8. Raises InputError naming what is wrong."""
    content = file.bytes()
    if len(content) >= 4 and content[:4].tobytes() == b"glTF":
        text, binary = _glb(file, content)
    else:
        text, binary = content, None
    document = _json(file, text)
    check_shape(file, document)
    version = document.get("asset", {}).get("version", "")
    if version.split(".")[0] != "2":
        raise InputError(file, "asset.version", f"{version!r}, but glTF 2.x is read", "convert the file to glTF 2.0")
    return document, [_buffer(file, number, one, binary) for number, one in enumerate(document.get("buffers", []))]


def _glb(file: InputFile, content: Array) -> tuple[Array, Array | None]:
    if len(content) < 20:
        raise InputError(file, "header", f"{len(content)} bytes, too few for a GLB file", EXPORT_AGAIN)
    _, version, length = (int(word) for word in content[:12].view("<u4"))
    if version != 2:
        raise InputError(file, "header", f"version {version}, but version 2 is read", EXPORT_AGAIN)
    if length > len(content):
        raise InputError(
            file, "header", f"{length} bytes announced, {len(content)} there: the file is cut off", EXPORT_AGAIN
        )
    chunks: dict[int, Array] = {}
    at = 12
    while at + 8 <= length:
        size, kind = (int(word) for word in content[at : at + 8].copy().view("<u4"))
        if at + 8 + size > length:
            raise InputError(
                file, f"chunk at byte {at}", f"{size} bytes announced, {length - at - 8} there", EXPORT_AGAIN
            )
        chunks.setdefault(kind, content[at + 8 : at + 8 + size])
        at += 8 + (size + 3) // 4 * 4
    if JSON_CHUNK not in chunks:
        raise InputError(file, "header", "there is no JSON chunk", EXPORT_AGAIN)
    return chunks[JSON_CHUNK], chunks.get(BIN_CHUNK)


def _json(file: InputFile, text: Array) -> dict[str, Any]:
    if not len(text):
        raise InputError(file, "", "the file is empty", EXPORT_AGAIN)
    try:
        document = json.loads(text.tobytes().decode("utf-8-sig"), parse_float=_finite, parse_constant=_finite)
    except UnicodeDecodeError as error:
        raise InputError(file, f"byte {error.start}", "not UTF-8: this is no glTF file", EXPORT_AGAIN) from None
    except json.JSONDecodeError as error:
        raise InputError(
            file, f"line {error.lineno}, column {error.colno}", f"not JSON: {error.msg}", EXPORT_AGAIN
        ) from None
    except ValueError as error:  # a number that is none, or longer than Python takes
        raise InputError(file, "", f"not JSON: {error}", EXPORT_AGAIN) from None
    except RecursionError:
        raise InputError(file, "", "JSON nested too deeply", EXPORT_AGAIN) from None
    if not isinstance(document, dict):
        raise InputError(file, "", "JSON, but no object: this is no glTF file", EXPORT_AGAIN)
    _check_depth(file, document)
    if LONE_SURROGATE.search(text.tobytes()):
        _check_characters(file, document)
    return document


def _check_depth(file: InputFile, document: dict[str, Any]) -> None:
    level: list[Any] = [document]
    for _ in range(DEEPEST):
        members = (one.values() if isinstance(one, dict) else one for one in level)
        level = [member for some in members for member in some if isinstance(member, (dict, list))]
    if level:
        raise InputError(file, "", f"JSON nested too deeply, more than {DEEPEST} levels", EXPORT_AGAIN)


def _check_characters(file: InputFile, document: dict[str, Any]) -> None:
    try:
        json.dumps(document, ensure_ascii=False).encode()
    except UnicodeEncodeError as error:
        code = ord(error.object[error.start])
        raise InputError(
            file, "", f"the escape \\u{code:04x} stands alone in a text: half a character", "correct the text"
        ) from None


def _finite(text: str) -> float:
    number = float(text)
    if not math.isfinite(number):
        raise ValueError(f"the number {text[:40]} is not finite")
    return number


def _buffer(file: InputFile, number: int, buffer: dict[str, Any], binary: Array | None) -> Array:
    place, size = f"buffer {number}", buffer.get("byteLength")
    if size is None:
        raise InputError(file, place, f"byteLength is {size!r}", EXPORT_AGAIN)
    if "uri" in buffer:
        content, _ = resolve(file, place, buffer["uri"])
    elif binary is not None and number == 0:
        content = binary
    elif any(name.endswith("_meshopt_compression") for name in buffer.get("extensions", {})):
        return np.zeros(0, np.uint8)  # a stand-in without data for what is compressed
    else:
        raise InputError(file, place, "neither a uri nor a binary chunk", EXPORT_AGAIN)
    if len(content) < size:
        raise InputError(
            file, place, f"byteLength is {size}, but {len(content)} bytes are there: the data is cut off", EXPORT_AGAIN
        )
    return content[:size]


def resolve(file: InputFile, place: str, uri: str) -> tuple[Array, str]:
    """What a uri names, (size,) uint8, and its media type if the uri states one. Raises InputError if it is gone."""
    data = DATA_URI.match(uri)
    if data:
        body = uri[data.end() :]
        try:
            content = base64.b64decode(body, validate=True) if data[3] else unquote_to_bytes(body)
        except (binascii.Error, ValueError):
            raise InputError(file, place, "its data uri is not base64", EXPORT_AGAIN) from None
        return np.frombuffer(content, np.uint8), data[1]
    beside = side_file(file, place, uri)
    if not beside.exists:
        raise InputError(file, place, f"there is no file {uri[:80]!r}, which it names", "put it beside this one")
    return beside.bytes(), ""


def side_file(file: InputFile, place: str, uri: str) -> InputFile:
    """The file beside this one that a relative uri names."""
    name = unquote(uri)
    if SCHEME.match(uri) or name.startswith(("/", "\\")) or "\0" in name:
        raise InputError(
            file,
            place,
            f"uri {uri[:80]!r} is not a relative path; nothing else is read",
            "put the file beside this one",
        )
    return file.beside(name.replace("\\", "/") if "\\" in name and "/" not in name else name)
