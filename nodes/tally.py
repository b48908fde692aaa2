"""The library at a glance."""

from __future__ import annotations

import csv
import io
import json
from pathlib import PurePosixPath

import numpy as np
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import SEVERITIES, Files, Findings, OutFile, OutputFile

RANK: dict[str, int] = {severity: rank for rank, severity in enumerate(SEVERITIES)}


def tally(findings: dict[str, Findings], *, file: OutputFile | str) -> Files:
    """A table with a row for each asset: its verdict, how many findings of each severity, its facts, what was found.

    file  where to; its suffix says the form: .csv, .json, .md, or .txt for columns that line up

    The verdict is faulty, warned or sound; what was accepted counts as a note. Findings are listed worst first, each
    with how many elements it has. Raises InputError for other suffixes.
    """
    forms = {".csv": _csv, ".json": _json, ".md": _markdown, ".txt": _lined_up}
    suffix = PurePosixPath(file).suffix.lower()
    if suffix not in forms:
        raise InputError(file, "", f'suffix "{suffix}" names no table', f"write one of {', '.join(forms)}")
    text = forms[suffix]([_row(name, one) for name, one in findings.items()])
    return Files((OutFile(file, np.frombuffer(text.encode(), np.uint8)),))


def _row(name: str, findings: Findings) -> dict[str, str | float]:
    counts = {severity: sum(1 for item in findings.items if item.standing == severity) for severity in SEVERITIES}
    return {
        "asset": name,
        "verdict": findings.verdict,
        **{f"{one}s": count for one, count in counts.items()},
        **findings.facts,
        "findings": _worst_first(findings),
    }


def _worst_first(findings: Findings) -> str:
    """Each id once, with its count over all parts."""
    told: dict[str, int] = {}
    for item in sorted(findings.items, key=lambda item: RANK[item.standing]):
        told[item.id] = told.get(item.id, 0) + item.count
    return "; ".join(f"{id} {count}" for id, count in told.items())


def _columns(rows: list[dict[str, str | float]]) -> list[str]:
    names = dict.fromkeys(["asset", "verdict", *(f"{one}s" for one in SEVERITIES)])
    for row in rows:
        names |= dict.fromkeys(row)
    return [*(name for name in names if name != "findings"), "findings"]


def _csv(rows: list[dict[str, str | float]]) -> str:
    out = io.StringIO()
    writer = csv.DictWriter(out, _columns(rows), restval="", lineterminator="\n")
    writer.writeheader()
    writer.writerows(rows)
    return out.getvalue()


def _json(rows: list[dict[str, str | float]]) -> str:
    return json.dumps(rows, indent=1, ensure_ascii=False) + "\n"


def _markdown(rows: list[dict[str, str | float]]) -> str:
    columns = _columns(rows)
    lines = [
        columns,
        ["---"] * len(columns),
        *([_plain(row.get(name, "")).replace("|", "\\|") for name in columns] for row in rows),
    ]
    return "".join("| " + " | ".join(line) + " |\n" for line in lines)


def _lined_up(rows: list[dict[str, str | float]]) -> str:
    columns = _columns(rows)
    table = [columns, *([_plain(row.get(name, "")) for name in columns] for row in rows)]
    widths = [max(len(cell) for cell in column) for column in zip(*table, strict=True)]
    numbers = [all(isinstance(row.get(name, 0), (int, float)) for row in rows) for name in columns]
    return "".join(
        "  ".join(
            cell.rjust(width) if number else cell.ljust(width)
            for cell, width, number in zip(line, widths, numbers, strict=True)
        ).rstrip()
        + "\n"
        for line in table
    )


def _plain(value: str | float) -> str:
    """On one line, whatever a file's name holds."""
    return " ".join(str(value).split())
