"""The page of a library as one self-contained HTML document: nothing is fetched, all text is escaped.

document.html, document.css and document.js beside this file are its frame, its look, and its viewer.
"""

from __future__ import annotations

import json
from base64 import b64encode
from html import escape
from pathlib import Path
from string import Template
from typing import Any, NamedTuple

from tangentry.pipeline.flow import SEVERITIES, VERDICTS, Array, Finding, Findings

RANK: dict[str, int] = {severity: rank for rank, severity in enumerate(SEVERITIES)}


class Entry(NamedTuple):
    """An asset on the page."""

    findings: Findings
    scene: dict[str, Any] | None  # see scene.py; None: there is nothing to turn around
    preview: Array | None  # a PNG file, (size,) uint8
    layouts: tuple[Array, ...]  # PNG files


def document(title: str, entries: dict[str, Entry]) -> str:
    """The page, assets that are faulty first."""
    ordered = sorted(entries.items(), key=lambda pair: (VERDICTS.index(pair[1].findings.verdict), pair[0]))
    verdicts = [entry.findings.verdict for entry in entries.values()]
    counts = ", ".join(f"{verdicts.count(verdict)} {verdict}" for verdict in VERDICTS)
    return Template(_text("html")).substitute(
        title=escape(title),
        style=_text("css"),
        script=_text("js"),
        counts=escape(f"{len(entries)} assets: {counts}"),
        choices=" ".join(
            f'<label><input type="checkbox" name="verdict" value="{one}" checked> {one}</label>' for one in VERDICTS
        ),
        assets="\n".join(_article(name, entry) for name, entry in ordered),
    )


def _text(form: str) -> str:
    return Path(__file__).with_suffix(f".{form}").read_text("utf-8")


def _article(name: str, entry: Entry) -> str:
    findings = entry.findings
    words = " ".join([name, *(f"{item.id} {item.part} {item.material}" for item in findings.items)]).lower()
    numbered = sorted(enumerate(findings.items), key=lambda pair: RANK[pair[1].standing])
    listed = "".join(_finding(k, item, entry) for k, item in numbered)
    return (
        f'<article class="{findings.verdict}" data-verdict="{findings.verdict}" data-words="{escape(words)}">'
        f"<h2>{escape(name)} <b>{findings.verdict}</b></h2>"
        f'<div class="seen">{_stage(name, entry)}</div>'
        f"<div>{f'<ul>{listed}</ul>' if listed else '<p class=none>Nothing was found.</p>'}{_facts(findings)}</div>"
        f"{_layouts(name, entry)}</article>"
    )


def _finding(number: int, item: Finding, entry: Entry) -> str:
    where = " / ".join(one for one in (item.part, item.material) if one)
    advice = f"accepted: {item.accepted}" if item.accepted else item.advice
    marked = entry.scene is not None and str(number) in entry.scene["marks"]
    button = f'<button type="button" data-mark="{number}" aria-pressed="false">show</button>' if marked else ""
    lines = [f"<h3>{escape(item.id)} ({item.count:,})</h3>", button, f"<p>{escape(item.what)}</p>"]
    lines += [f"<p>{escape(advice)}</p>"] if advice else []
    lines += [f'<p class="where">{escape(where + _elements(item))}</p>'] if where or len(item.elements) else []
    return f'<li class="{item.standing}">{"".join(lines)}</li>'


def _elements(item: Finding) -> str:
    if not len(item.elements):
        return ""
    listed = ", ".join(str(one) for one in item.elements[:6]) + (" ..." if len(item.elements) > 6 else "")
    return f": {item.element} {listed}"


def _stage(name: str, entry: Entry) -> str:
    picture = f'<img alt="{escape(name)}" src="{_png(entry.preview)}">' if entry.preview is not None else ""
    if entry.scene is None:
        return f'<div class="stage">{picture}</div>' if picture else ""
    data = json.dumps(entry.scene, separators=(",", ":"))  # numbers, base64 and our own words: nothing to escape
    return (
        f'<div class="stage">{picture}<button type="button" class="open">turn it around</button></div>'
        f'<script type="application/json" class="scene">{data}</script>'
    )


def _layouts(name: str, entry: Entry) -> str:
    if not entry.layouts:
        return ""
    pictures = "".join(f'<img alt="UV layout of {escape(name)}" src="{_png(one)}">' for one in entry.layouts)
    return f'<details class="layout"><summary>UV layout</summary>{pictures}</details>'


def _facts(findings: Findings) -> str:
    if not findings.facts:
        return ""
    rows = "".join(
        f"<div><dt>{escape(name)}</dt><dd>{escape(_figure(value))}</dd></div>" for name, value in findings.facts.items()
    )
    return f"<details><summary>facts</summary><dl>{rows}</dl></details>"


def _figure(value: float | str) -> str:
    return value if isinstance(value, str) else f"{value:,}" if value == int(value) else f"{value:g}"


def _png(content: Array) -> str:
    return f"data:image/png;base64,{b64encode(content.tobytes()).decode()}"
