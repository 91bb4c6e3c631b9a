"""The output folder: whole or not at all, and nothing of anybody else's is lost."""

import json
import os
from pathlib import Path

import pytest

from harmonic_planner.export import folder
from harmonic_planner.export.folder import OutputRefusedError, OutputWriteError

SCHEMA = "harmonic-planner/plan/1"
PLAN = {"plan.json": json.dumps({"schema": SCHEMA, "files": ["plan.json", "lines.csv"]}), "lines.csv": b"a,b\n"}
NEWER = {"plan.json": json.dumps({"schema": SCHEMA, "files": ["plan.json"]}), "sub/extra.txt": "µ"}


def snapshot(top: Path) -> dict[str, bytes | str | None]:
    """Everything below a folder: content of files, aim of links, None for folders."""
    return {
        str(path.relative_to(top)): os.readlink(path)
        if path.is_symlink()
        else (path.read_bytes() if path.is_file() else None)
        for path in sorted(top.rglob("*"))
    }


def test_writes_text_and_bytes_into_a_new_folder(tmp_path):
    folder.write(tmp_path / "out", NEWER)
    assert snapshot(tmp_path / "out") == {
        "plan.json": NEWER["plan.json"].encode(),
        "sub": None,
        "sub/extra.txt": "µ".encode(),
    }
    assert os.listdir(tmp_path) == ["out"]


def test_makes_missing_folders_above(tmp_path):
    folder.write(tmp_path / "a" / "b" / "out", PLAN)
    assert (tmp_path / "a" / "b" / "out" / "lines.csv").read_bytes() == b"a,b\n"


def test_replaces_an_empty_folder_and_an_earlier_plan_whole(tmp_path):
    out = tmp_path / "out"
    out.mkdir()
    folder.write(out, PLAN)
    folder.write(out, NEWER)
    assert sorted(snapshot(out)) == ["plan.json", "sub", "sub/extra.txt"]
    assert os.listdir(tmp_path) == ["out"]


def test_keeps_the_permissions_of_the_folder_it_replaces(tmp_path):
    out = tmp_path / "out"
    folder.write(out, PLAN)
    out.chmod(0o750)
    folder.write(out, PLAN)
    assert out.stat().st_mode & 0o777 == 0o750


def test_follows_a_link_to_a_folder(tmp_path):
    (tmp_path / "real").mkdir()
    (tmp_path / "link").symlink_to("real")
    folder.write(tmp_path / "link", PLAN)
    assert (tmp_path / "link").is_symlink()
    assert (tmp_path / "real" / "plan.json").is_file()


def make_file(out: Path) -> None:
    out.write_text("mine")


def make_foreign(out: Path) -> None:
    out.mkdir()
    (out / "thesis.tex").write_text("mine")


def make_foreign_json(out: Path) -> None:
    out.mkdir()
    (out / "plan.json").write_text('{"schema": "somebody else\'s"}')


def make_broken_json(out: Path) -> None:
    out.mkdir()
    (out / "plan.json").write_bytes(b"\xff{")


def make_list_json(out: Path) -> None:
    out.mkdir()
    (out / "plan.json").write_text("[1, 2]")


def make_plan_with_notes(out: Path) -> None:
    folder.write(out, PLAN)
    (out / "notes.txt").write_text("mine")


def make_plan_with_link(out: Path) -> None:
    folder.write(out, PLAN)
    (out / "elsewhere").symlink_to(out.parent)


def make_dangling(out: Path) -> None:
    out.symlink_to("nowhere")


def make_linked_plan(out: Path) -> None:
    folder.write(out.parent / "other", PLAN)
    out.mkdir()
    (out / "plan.json").symlink_to("../other/plan.json")


def make_inner_folder(out: Path) -> None:
    (out / "photos").mkdir(parents=True)


@pytest.mark.parametrize(
    ("make", "words"),
    [
        (make_file, "is a file"),
        (make_foreign, r"not a plan \(thesis.tex"),
        (make_foreign_json, "not a plan"),
        (make_broken_json, "not a plan"),
        (make_list_json, "not a plan"),
        (make_plan_with_notes, "holds notes.txt"),
        (make_plan_with_link, "holds elsewhere"),
        (make_dangling, "a link to nothing"),
        (make_linked_plan, "not a plan"),
        (make_inner_folder, r"not a plan \(photos"),
    ],
)
def test_refuses_what_is_not_ours_and_leaves_it_alone(tmp_path, make, words):
    out = tmp_path / "out"
    make(out)
    before = snapshot(tmp_path)
    for act in (lambda: folder.check(out), lambda: folder.write(out, PLAN)):
        with pytest.raises(OutputRefusedError, match=f"--out .*{words}"):
            act()
    assert snapshot(tmp_path) == before


def test_files_that_desktops_leave_behind_do_not_count(tmp_path):
    out = tmp_path / "out"
    folder.write(out, PLAN)
    (out / ".DS_Store").write_text("")
    folder.write(out, NEWER)
    assert not (out / ".DS_Store").exists()


DEEP = {
    "plan.json": json.dumps({"schema": SCHEMA, "files": ["plan.json", "filters/01_a.cir", "filters/01_a.s2p"]}),
    "filters/01_a.cir": "* one",
    "filters/01_a.s2p": "! one",
}


def test_a_folder_inside_is_replaced_whole_with_what_the_earlier_plan_wrote_there(tmp_path):
    out = tmp_path / "out"
    folder.write(out, DEEP)
    newer = {"plan.json": json.dumps({"schema": SCHEMA, "files": ["filters/02_b.cir"]}), "filters/02_b.cir": "* two"}
    folder.write(out, newer)
    assert sorted(snapshot(out)) == ["filters", "filters/02_b.cir", "plan.json"]
    folder.write(out, PLAN)
    assert sorted(snapshot(out)) == ["lines.csv", "plan.json"]


def add_file_inside(out: Path) -> None:
    (out / "filters" / "notes.txt").write_text("mine")


def add_file_of_a_listed_name_elsewhere(out: Path) -> None:
    (out / "01_a.cir").write_text("mine")


def add_file_deeper(out: Path) -> None:
    (out / "filters" / "old").mkdir()
    (out / "filters" / "old" / "01_a.cir").write_text("mine")


def add_link_inside(out: Path) -> None:
    (out / "filters" / "bench").symlink_to(out.parent)


def replace_folder_by_link(out: Path) -> None:
    (out / "filters").rename(out.parent / "kept")
    (out / "filters").symlink_to("../kept")


@pytest.mark.parametrize(
    ("change", "name"),
    [
        (add_file_inside, "filters/notes.txt"),
        (add_file_of_a_listed_name_elsewhere, "01_a.cir"),
        (add_file_deeper, "filters/old/01_a.cir"),
        (add_link_inside, "filters/bench"),
        (replace_folder_by_link, "filters"),
    ],
)
def test_what_is_not_ours_in_a_folder_inside_is_refused_and_left_alone(tmp_path, change, name):
    out = tmp_path / "out"
    folder.write(out, DEEP)
    change(out)
    before = snapshot(tmp_path)
    with pytest.raises(OutputRefusedError, match=f"holds {name},"):
        folder.write(out, DEEP)
    assert snapshot(tmp_path) == before


@pytest.mark.parametrize("fail_at", range(5))
def test_a_failure_among_folders_inside_restores_what_was_there(tmp_path, monkeypatch, fail_at):
    """The nth call fails: the new folder and the one in it made, three files written."""
    out = tmp_path / "out"
    folder.write(out, DEEP)
    before = snapshot(tmp_path)
    calls = 0

    def failing(original):
        def call(self, *args, **settings):
            nonlocal calls
            calls += 1
            if calls - 1 == fail_at:
                raise OSError(28, "No space left on device")
            return original(self, *args, **settings)

        return call

    monkeypatch.setattr(Path, "write_bytes", failing(Path.write_bytes))
    monkeypatch.setattr(Path, "mkdir", failing(Path.mkdir))
    with pytest.raises(OutputWriteError, match="No space left"):
        folder.write(out, DEEP)
    monkeypatch.undo()
    assert calls > fail_at
    assert snapshot(tmp_path) == before


def test_refuses_a_file_in_the_way(tmp_path):
    (tmp_path / "file").write_text("mine")
    with pytest.raises(OutputRefusedError, match="file is a file"):
        folder.write(tmp_path / "file" / "out", PLAN)


@pytest.mark.parametrize("name", [".", "..", "inner/.."])
def test_refuses_the_current_folder_and_those_above(tmp_path, monkeypatch, name):
    (tmp_path / "here" / "inner").mkdir(parents=True)
    monkeypatch.chdir(tmp_path / "here")
    with pytest.raises(OutputRefusedError, match="current folder"):
        folder.write(Path(name), PLAN)


@pytest.mark.parametrize("name", ["../x", "/etc/x", "", "a/../../x"])
def test_a_name_that_leads_outside_is_refused(tmp_path, name):
    with pytest.raises(ValueError, match="not a name inside"):
        folder.write(tmp_path / "out", {name: "x"})
    assert os.listdir(tmp_path) == []


class StopNow(BaseException):
    """Stands for a signal."""


@pytest.mark.parametrize("fault", [OSError(28, "No space left on device"), StopNow()])
@pytest.mark.parametrize("fail_at", range(4))
def test_any_failure_restores_what_was_there(tmp_path, monkeypatch, fault, fail_at):
    """The nth call to the file system fails: two writes, the old folder moved aside, the new one moved in."""
    out = tmp_path / "out"
    folder.write(out, PLAN)
    before = snapshot(tmp_path)
    calls = 0

    def failing(original):
        def call(self, *args):
            nonlocal calls
            calls += 1
            if calls - 1 == fail_at:
                raise fault
            return original(self, *args)

        return call

    monkeypatch.setattr(Path, "write_bytes", failing(Path.write_bytes))
    monkeypatch.setattr(Path, "rename", failing(Path.rename))
    with pytest.raises(StopNow if isinstance(fault, StopNow) else OutputWriteError):
        folder.write(out, NEWER)
    monkeypatch.undo()
    assert calls > fail_at
    assert snapshot(tmp_path) == before


def test_a_failure_takes_back_the_folders_made_above(tmp_path, monkeypatch):
    monkeypatch.setattr(Path, "write_bytes", lambda *_: (_ for _ in ()).throw(OSError(28, "No space left on device")))
    with pytest.raises(OutputWriteError, match="No space left"):
        folder.write(tmp_path / "a" / "b" / "out", PLAN)
    assert os.listdir(tmp_path) == []


def test_missing_permission_is_said_early(tmp_path, monkeypatch):
    # Asked of the system rather than made with chmod, so that the check also holds for root, who may write anywhere.
    monkeypatch.setattr(os, "access", lambda path, _mode: Path(path) != tmp_path)
    with pytest.raises(OutputWriteError, match="no permission to write in"):
        folder.check(tmp_path / "out")
    monkeypatch.setattr(os, "access", lambda path, _mode: Path(path) != tmp_path / "out")
    (tmp_path / "out").mkdir()
    with pytest.raises(OutputWriteError, match="no permission to replace it"):
        folder.check(tmp_path / "out")


def test_a_name_too_long_for_the_file_system_is_said_plainly(tmp_path):
    with pytest.raises(OutputWriteError, match="cannot be written"):
        folder.write(tmp_path / ("x" * 300), PLAN)
    assert os.listdir(tmp_path) == []
