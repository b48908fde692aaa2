"""Output files are results: kept in place, never written over what is somebody else's."""

from __future__ import annotations

import pytest
from tangentry.pipeline.errors import GraphError


def test_a_deleted_output_is_put_back_without_running_its_node(project):
    project.build()
    (project.folder / "made/a.out").unlink()

    record = project.build()

    assert project.calls == [] and record.restored == ["made/a.out"]
    assert project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_an_altered_output_is_put_back(project):
    project.build()
    project.write("made/a.out", "scribbled")

    project.build()

    assert project.read("made/a.out") == "HELLO A\nHELLO A\n" and project.calls == []


def test_a_file_this_graph_did_not_write_is_left_alone(project):
    project.write("made/a.out", "precious")

    record = project.build()

    assert project.read("made/a.out") == "precious" and record.assets[0].state == "failed"
    assert "--overwrite" in record.assets[0].errors[0]


def test_overwrite_replaces_it(project):
    project.write("made/a.out", "precious")

    record = project.build(overwrite=True)

    assert record.sound and project.read("made/a.out") == "HELLO A\nHELLO A\n"


def test_the_output_of_a_removed_asset_is_named_and_removed_only_when_tidying(project):
    project.build()
    (project.folder / "props/b.txt").unlink()

    assert project.build().left_over == ["made/b.out"] and (project.folder / "made/b.out").exists()
    assert project.build(tidy=True).tidied and not (project.folder / "made/b.out").exists()


def test_the_output_of_an_asset_that_became_faulty_is_named(project):
    project.build()
    project.write("props/b.txt", "rude\n")

    assert project.build().left_over == ["made/b.out"]


def test_the_output_of_an_asset_that_fails_for_now_stays_claimed(project):
    project.build()
    project.write("props/b.txt", "broken\n")

    assert project.build().left_over == []


def test_no_unfinished_file_is_left_behind(project):
    project.build()

    assert not [path for path in project.folder.rglob("*.unfinished")]


def test_outputs_are_not_taken_for_members_of_the_library(project):
    project.edit("graph.yaml", "library: props/*.txt", 'library: "**/*.txt"')
    project.edit("graph.yaml", "{stem}.out", "{stem}.txt")
    project.build()

    assert len(project.build().assets) == 3


@pytest.mark.parametrize("path", ["made/one.out", "{out}/./one.out", "made/../made/one.out"])
def test_two_assets_that_would_make_one_file_are_refused_before_anything_runs(project, path):
    project.edit("graph.yaml", "{out}/{stem}.out", path)

    with pytest.raises(
        GraphError, match=r"would be made twice: by props/a.txt, node done and by props/b.txt, node done"
    ):
        project.build()
    assert project.calls == []


def test_two_nodes_whose_files_turn_out_to_be_one_are_told_and_the_first_stays(project):
    project.edit("kinds/put.py", "OutFile(file,", 'OutFile("same.out",')

    record = project.build()

    assert [asset.state for asset in record.assets] == ["made", "failed", "failed"]
    assert "made/same.out: is also made by props/a.txt done" in record.assets[1].errors[0]
    assert project.read("made/same.out") == "HELLO A\nHELLO A\n"


def test_a_file_that_is_read_is_never_made_over_even_with_overwrite(project):
    project.edit("graph.yaml", "{out}/{stem}.out", "props/{stem}.txt")

    with pytest.raises(GraphError, match=r"props/a.txt would be made by .*, over what is read by"):
        project.build(overwrite=True)
    assert project.read("props/a.txt") == "hello a\n"


@pytest.mark.parametrize("name", ["../../escaped.txt", "/tmp/escaped.txt"])
def test_a_node_cannot_write_outside_its_place(project, name):
    project.edit("kinds/put.py", "OutFile(file,", f'OutFile("{name}",')

    record = project.build()

    assert "may only write below made" in record.assets[0].errors[0] and not list(project.folder.glob("../escaped*"))


def test_a_file_with_the_right_content_is_taken_over_and_then_kept(project):
    project.write("made/a.out", "HELLO A\nHELLO A\n")
    assert project.build().sound

    project.write("props/a.txt", "new\n")

    assert project.build().sound and project.read("made/a.out") == "NEW\nNEW\n"
