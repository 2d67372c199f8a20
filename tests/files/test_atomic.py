"""A file is written whole or not at all."""

import os

import pytest

from recon.errors import InputError
from recon.files import replacing


def test_success_replaces_the_file_and_leaves_nothing_else(tmp_path):
    target = tmp_path / "image.tif"
    target.write_text("old")
    with replacing(target) as temporary:
        assert temporary.parent == tmp_path
        assert temporary.suffix == ".tif"
        temporary.write_text("new")
        assert target.read_text() == "old"
    assert target.read_text() == "new"
    assert os.listdir(tmp_path) == ["image.tif"]


@pytest.mark.parametrize("error", [RuntimeError, KeyboardInterrupt])
def test_failure_leaves_the_old_file_and_nothing_else(tmp_path, error):
    target = tmp_path / "image.tif"
    target.write_text("old")

    def write_half():
        with replacing(str(target)) as temporary:
            temporary.write_text("half")
            raise error

    with pytest.raises(error):
        write_half()
    assert target.read_text() == "old"
    assert os.listdir(tmp_path) == ["image.tif"]


def test_new_files_get_the_usual_permissions(tmp_path):
    with replacing(tmp_path / "a.json") as temporary:
        temporary.write_text("{}")
    (tmp_path / "b.json").write_text("{}")
    assert (tmp_path / "a.json").stat().st_mode == (tmp_path / "b.json").stat().st_mode


def test_a_link_keeps_pointing_to_the_file(tmp_path):
    (tmp_path / "real.txt").write_text("old")
    (tmp_path / "link.txt").symlink_to("real.txt")
    with replacing(tmp_path / "link.txt") as temporary:
        temporary.write_text("new")
    assert (tmp_path / "link.txt").is_symlink()
    assert (tmp_path / "real.txt").read_text() == "new"


@pytest.mark.parametrize(
    ("name", "message"),
    [(".", "is a directory; give the name of a file"), ("no/such/a.txt", "directory that does not exist")],
)
def test_impossible_places_are_refused(tmp_path, name, message):
    with pytest.raises(InputError, match=message), replacing(tmp_path / name):
        pytest.fail("the block must not be entered")


def test_a_folder_that_cannot_be_written_to_is_refused(tmp_path, monkeypatch):
    monkeypatch.setattr(os, "access", lambda *_args: False)
    with pytest.raises(InputError, match="cannot be written to"), replacing(tmp_path / "a.txt"):
        pytest.fail("the block must not be entered")


@pytest.mark.parametrize("path", [None, 3.5, "a\0b", ["a"]])
def test_what_is_no_path_is_refused(path):
    with pytest.raises(InputError, match="is not the name of a file"), replacing(path):
        pytest.fail("the block must not be entered")
