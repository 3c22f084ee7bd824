"""Output appears whole or not at all, and never over an earlier result unless asked."""

import os
import stat

import pytest

from aquabuf.errors import FileError
from aquabuf.report.files import OutputFolder

NAMES = ("a.csv", "b.csv", "c.csv")


def write(folder, contents, *, force=False, fail=None):
    """Publish the contents by name; raise `fail` before the end if given."""
    with OutputFolder(folder, NAMES, force=force) as out:
        for name, text in contents.items():
            out.part(name).write_text(text)
        if fail:
            raise fail


def seen(folder):
    """Names and contents of all files, hidden ones too."""
    return {p.name: p.read_text() for p in folder.iterdir()}


def test_files_get_their_names_at_the_end(tmp_path):
    """Until then only hidden parts are there."""
    folder = tmp_path / "deep" / "out"
    with OutputFolder(folder, NAMES, force=False) as out:
        out.part("a.csv").write_text("1")
        assert out.part("a.csv") == out.part("a.csv")
        assert [p.name[:7] for p in folder.iterdir()] == [".a.csv."]
        assert out.written == {"a.csv"}
    assert seen(folder) == {"a.csv": "1"}


@pytest.mark.parametrize("error", [RuntimeError("x"), KeyboardInterrupt(), SystemExit(3)], ids=type)
def test_nothing_is_left_after_an_error(tmp_path, error):
    """Neither a half file nor a part of one, nor a new folder; the error goes on."""
    with pytest.raises(type(error)):
        write(tmp_path / "out", {"a.csv": "1", "b.csv": "2"}, fail=error)
    assert not (tmp_path / "out").exists()


def test_a_folder_that_was_there_stays_after_an_error(tmp_path):
    """Empty as it was; and a new folder stays if someone else has put a file there meanwhile."""
    (tmp_path / "old").mkdir()
    with pytest.raises(RuntimeError, match="x"):
        write(tmp_path / "old", {"a.csv": "1"}, fail=RuntimeError("x"))
    assert seen(tmp_path / "old") == {}
    out = OutputFolder(tmp_path / "new", NAMES, force=False).__enter__()
    (tmp_path / "new" / "other.txt").write_text("theirs")
    out.__exit__(RuntimeError, RuntimeError("x"), None)
    assert seen(tmp_path / "new") == {"other.txt": "theirs"}


def test_an_error_leaves_the_earlier_result(tmp_path):
    """A forced run that fails does not harm what was there."""
    write(tmp_path, {"a.csv": "old", "b.csv": "old"})
    with pytest.raises(RuntimeError, match="x"):
        write(tmp_path, {"a.csv": "new"}, force=True, fail=RuntimeError("x"))
    assert seen(tmp_path) == {"a.csv": "old", "b.csv": "old"}


def test_an_earlier_result_is_not_overwritten(tmp_path):
    """The message names folder, file and both ways out; nothing changes."""
    write(tmp_path / "out", {"b.csv": "old"})
    with pytest.raises(FileError, match=r"^out/b.csv exists already and is not overwritten. Choose another folder with --out, "
                                        r"or replace it with --force.$"):
        write(tmp_path / "out", {"a.csv": "new"})
    assert seen(tmp_path / "out") == {"b.csv": "old"}


def test_force_replaces_and_removes_what_is_stale(tmp_path):
    """A folder never mixes two runs; files of other names stay."""
    write(tmp_path, {"a.csv": "old", "b.csv": "old"})
    (tmp_path / "notes.txt").write_text("mine")
    write(tmp_path, {"a.csv": "new", "c.csv": "new"}, force=True)
    assert seen(tmp_path) == {"a.csv": "new", "c.csv": "new", "notes.txt": "mine"}


def test_a_file_with_nothing_to_say_is_dropped(tmp_path):
    """It is neither published nor left as a part; dropping it twice does no harm."""
    with OutputFolder(tmp_path, NAMES, force=False) as out:
        out.part("a.csv").write_text("1")
        out.part("b.csv").write_text("2")
        out.drop("b.csv")
        out.drop("b.csv")
    assert seen(tmp_path) == {"a.csv": "1"}


def test_a_file_in_place_of_the_folder(tmp_path):
    """The reason of the system in words."""
    (tmp_path / "out").write_text("x")
    with pytest.raises(FileError, match=r"^the folder 'out' cannot be made: file exists. Choose another with --out.$"):
        write(tmp_path / "out", {"a.csv": "1"})
    with pytest.raises(FileError, match=r"the folder 'in' cannot be made: not a directory"):
        write(tmp_path / "out" / "in", {"a.csv": "1"})


def test_a_folder_that_cannot_be_written(tmp_path, monkeypatch):
    """Said as the system says it (raised here by hand: the tests may run as a user who may do anything)."""
    def refuse(**_):
        raise PermissionError(13, "Permission denied")

    monkeypatch.setattr("aquabuf.report.files.tempfile.mkstemp", refuse)
    with pytest.raises(FileError, match=r"^the folder 'out' cannot be written to: permission denied. Choose another with --out.$"):
        write(tmp_path / "out", {"a.csv": "1"})
    assert not (tmp_path / "out").exists()


@pytest.mark.skipif(hasattr(os, "geteuid") and os.geteuid() == 0, reason="the superuser may write anywhere")
def test_a_folder_without_permission(tmp_path):
    """The same with a folder that is truly read-only."""
    folder = tmp_path / "out"
    folder.mkdir(mode=0o555)
    with pytest.raises(FileError, match="cannot be written to: permission denied"):
        write(folder, {"a.csv": "1"})


@pytest.mark.skipif(os.name != "posix", reason="permission bits of Unix")
def test_files_have_the_usual_permissions(tmp_path):
    """As any new file under the user's mask, not those of a private temporary file."""
    before = os.umask(0o027)
    try:
        write(tmp_path, {"a.csv": "1"})
    finally:
        os.umask(before)
    assert stat.S_IMODE((tmp_path / "a.csv").stat().st_mode) == 0o640


@pytest.mark.parametrize("contents", [{"a.csv": "1", "b.csv": "2"}, {"b.csv": "2"}], ids=["written", "stale"])
def test_a_folder_in_place_of_a_file(tmp_path, contents):
    """With force, a folder of that name is not removed: a message, and no parts left."""
    (tmp_path / "out" / "a.csv").mkdir(parents=True)
    with pytest.raises(FileError, match=r"a\.csv"):
        write(tmp_path / "out", contents, force=True)
    assert [p.name for p in (tmp_path / "out").iterdir()] == ["a.csv"]
