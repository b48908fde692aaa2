"""Output files are results: kept in place, never written over what is somebody else's."""

from __future__ import annotations


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
