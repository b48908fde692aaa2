"""The library at a glance, in four forms."""

from __future__ import annotations

import csv
import io
import json
import re

import numpy as np
import pytest
from tangentry.nodes.tally import tally
from tangentry.pipeline.errors import InputError
from tangentry.pipeline.flow import Finding, Findings


def finding(id: str, severity: str, count: int = 1, accepted: str = "") -> Finding:
    none = np.zeros(0, np.int32)
    return Finding(id, severity, count, "what", "advice", "part", "", "face", none, none, None, accepted)


LIBRARY = {
    "bench.obj": Findings("bench.obj", (), {"faces": 12}),
    "crate.obj": Findings(
        "crate.obj", (finding("uv-mirrored", "note", 4), finding("normal-far", "warning", 2)), {"faces": 6}
    ),
    "stair|well.obj": Findings(
        "stair|well.obj",
        (finding("uv-skewed", "note", 3), finding("tangent-zero", "fault", 1), finding("tangent-zero", "fault", 5)),
        {"faces": 400, "charts": 2},
    ),
}


def text(suffix: str, library: dict[str, Findings] = LIBRARY) -> str:
    (file,) = tally(library, file=f"tally{suffix}").files
    return file.content.tobytes().decode()


def rows(library: dict[str, Findings] = LIBRARY) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(text(".csv", library))))


def test_the_worst_finding_gives_the_verdict():
    assert {row["asset"]: row["verdict"] for row in rows()} == {
        "bench.obj": "sound",
        "crate.obj": "warned",
        "stair|well.obj": "faulty",
    }


def test_findings_are_listed_worst_first_with_their_counts_over_all_parts():
    assert [row["findings"] for row in rows()] == ["", "normal-far 2; uv-mirrored 4", "tangent-zero 6; uv-skewed 3"]


def test_what_is_accepted_counts_as_a_note():
    accepted = {"oar.glb": Findings("oar.glb", (finding("tangent-zero", "fault", accepted="the tip is capped"),), {})}
    (row,) = rows(accepted)

    assert (row["verdict"], row["faults"], row["notes"]) == ("sound", "0", "1")


def test_csv_and_json_say_the_same():
    for line, row in zip(rows(), json.loads(text(".json")), strict=True):
        assert {name: value for name, value in line.items() if value or name == "findings"} == {
            name: str(value) for name, value in row.items()
        }


def test_assets_without_a_fact_leave_its_column_empty():
    assert [row["charts"] for row in rows()] == ["", "", "2"]


def test_a_markdown_table_has_as_many_cells_in_every_line():
    lines = text(".md").replace("\\|", "").splitlines()

    assert len(lines) == 2 + len(LIBRARY)
    assert len({line.count("|") for line in lines}) == 1


def test_columns_of_a_text_table_line_up():
    head, *lines = text(".txt").splitlines()
    end = head.index("faces") + len("faces")

    assert [line[end - 5 : end] for line in lines] == ["   12", "    6", "  400"]
    assert lines[1][head.index("findings") :] == "normal-far 2; uv-mirrored 4"


@pytest.mark.parametrize("suffix", [".csv", ".md", ".txt"])
def test_an_empty_library_gives_a_head_alone(suffix):
    assert re.findall(r"\w+", text(suffix, {})) == ["asset", "verdict", "faults", "warnings", "notes", "findings"]


def test_other_forms_are_refused_by_name():
    with pytest.raises(InputError, match=r'"\.xlsx" names no table; write one of \.csv, \.json, \.md, \.txt'):
        tally(LIBRARY, file="tally.xlsx")
