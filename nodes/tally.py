"""The library at a glance."""

from __future__ import annotations

import csv
import io
import json
from pathlib import PurePosixPath

import numpy as np
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Files, Finding, Findings, OutFile, OutputFile

SEVERITIES = ("fault", "warning", "note")


def tally(findings: dict[str, Findings], *, file: OutputFile | str) -> Files:
    """A table with a row for each asset: its verdict, how many findings of each severity, its facts, what was found.

    file  where to; its suffix says the form: .csv, .json or .md

    The verdict is faulty, warned or sound. Raises InputError for other suffixes.
    """
    forms = {".csv": _csv, ".json": _json, ".md": _markdown}
    suffix = PurePosixPath(file).suffix.lower()
    if suffix not in forms:
        raise InputError(file, "", f'suffix "{suffix}" names no table', f"write one of {', '.join(forms)}")
    text = forms[suffix]([_row(name, one) for name, one in findings.items()])
    return Files((OutFile(file, np.frombuffer(text.encode(), np.uint8)),))


def _row(name: str, findings: Findings) -> dict[str, str | float]:
    counts = {severity: sum(1 for item in findings.items if _severity(item) == severity) for severity in SEVERITIES}
    verdict = "faulty" if counts["fault"] else "warned" if counts["warning"] else "sound"
    told: dict[str, int] = {}
    for item in findings.items:
        told[item.id] = told.get(item.id, 0) + item.count
    found = "; ".join(f"{id} {count}" for id, count in told.items())
    return {
        "asset": name,
        "verdict": verdict,
        **{f"{one}s": count for one, count in counts.items()},
        **findings.facts,
        "findings": found,
    }


def _severity(item: Finding) -> str:
    return "note" if item.accepted else item.severity


def _columns(rows: list[dict[str, str | float]]) -> list[str]:
    names: dict[str, None] = {}
    for row in rows:
        names |= dict.fromkeys(row)
    return [*(name for name in names if name != "findings"), *(["findings"] if "findings" in names else [])]


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
        *([str(row.get(name, "")).replace("|", "\\|") for name in columns] for row in rows),
    ]
    return "".join("| " + " | ".join(line) + " |\n" for line in lines)
