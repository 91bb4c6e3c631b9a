"""One new file: never over another, whole or not at all."""

import os
from pathlib import Path

import pytest

from harmonic_planner.export import new_file
from harmonic_planner.export.folder import OutputRefusedError, OutputWriteError


def make_file(path: Path) -> None:
    path.write_text("mine")


def make_folder(path: Path) -> None:
    path.mkdir()


def make_dangling(path: Path) -> None:
    path.symlink_to("nowhere")


@pytest.mark.parametrize("make", [make_file, make_folder, make_dangling])
def test_what_exists_is_refused_early_and_late_and_left_alone(make, tmp_path):
    make(tmp_path / "a")
    for attempt in (lambda: new_file.check(tmp_path / "a"), lambda: new_file.write(tmp_path / "a", "text")):
        with pytest.raises(OutputRefusedError, match="a: exists already; name a file that does not"):
            attempt()
    assert os.listdir(tmp_path) == ["a"]
    assert not (tmp_path / "a").is_file() or (tmp_path / "a").read_text() == "mine"


def test_a_text_is_written_as_it_is(tmp_path):
    new_file.check(tmp_path / "a")
    new_file.write(tmp_path / "a", "µ\r\nx\n")
    assert (tmp_path / "a").read_bytes() == "µ\r\nx\n".encode()


def test_a_folder_that_is_not_there(tmp_path):
    for attempt in (new_file.check, lambda path: new_file.write(path, "text")):
        with pytest.raises(OutputWriteError, match="cannot be written"):
            attempt(tmp_path / "missing" / "a")


def test_nothing_is_left_of_a_file_that_could_not_be_finished(tmp_path):
    with pytest.raises(UnicodeEncodeError):
        new_file.write(tmp_path / "a", "begun \ud800")
    assert os.listdir(tmp_path) == []
