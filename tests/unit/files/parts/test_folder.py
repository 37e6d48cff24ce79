"""The output folder: complete or absent, whatever happens, and never anybody else's files."""

from __future__ import annotations

import errno
import json
import os
import random
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

from sfcpart.errors import FileError, MeshError
from sfcpart.files.parts import folder as folder_module
from sfcpart.files.parts import replacing
from sfcpart.files.parts.folder import MANIFEST, check_output_folder, output_folder


def write(place: Path, text: str, **options) -> None:
    """Write a result of two files, one in a folder inside."""
    with output_folder(place, **options) as folder:
        (folder / "inner").mkdir()
        (folder / "inner" / "a.txt").write_text(text)
        (folder / "b.txt").write_text(text)


def contents(place: Path) -> dict[str, str]:
    """Return the files of a folder but for the list of them."""
    return {
        entry.relative_to(place).as_posix(): entry.read_text()
        for entry in place.rglob("*")
        if entry.is_file() and entry.name != MANIFEST
    }


def complete(text: str) -> dict[str, str]:
    """Return what `write` leaves."""
    return {"inner/a.txt": text, "b.txt": text}


def test_new_folder_with_missing_parents(tmp_path):
    write(tmp_path / "deep" / "down" / "parts", "new")
    assert contents(tmp_path / "deep" / "down" / "parts") == complete("new")
    assert [entry.name for entry in (tmp_path / "deep" / "down").iterdir()] == ["parts"]


def test_the_list_names_every_file_with_its_size(tmp_path):
    write(tmp_path / "parts", "new")
    listed = json.loads((tmp_path / "parts" / MANIFEST).read_text())["files"]
    assert listed == {"inner/a.txt": 3, "b.txt": 3}


def test_an_empty_folder_is_filled(tmp_path):
    (tmp_path / "parts").mkdir()
    write(tmp_path / "parts", "new")
    assert contents(tmp_path / "parts") == complete("new")


def test_a_full_folder_is_refused_unless_told(tmp_path):
    write(tmp_path / "parts", "old")
    with pytest.raises(FileError, match="holds something already"):
        write(tmp_path / "parts", "new")
    assert contents(tmp_path / "parts") == complete("old")
    write(tmp_path / "parts", "new", overwrite=True)
    assert contents(tmp_path / "parts") == complete("new")
    assert [entry.name for entry in tmp_path.iterdir()] == ["parts"]


def test_overwriting_without_exchange_in_one_step(tmp_path, monkeypatch):
    monkeypatch.setattr(replacing, "_exchanged", lambda one, other: False)
    write(tmp_path / "parts", "old")
    write(tmp_path / "parts", "new", overwrite=True)
    assert contents(tmp_path / "parts") == complete("new")
    assert [entry.name for entry in tmp_path.iterdir()] == ["parts"]


@pytest.mark.parametrize("name", ["notes.txt", "inner/notes.txt", "mine/notes.txt"])
def test_foreign_files_are_never_overwritten(tmp_path, name):
    write(tmp_path / "parts", "old")
    foreign = tmp_path / "parts" / name
    foreign.parent.mkdir(exist_ok=True)
    foreign.write_text("precious")
    with pytest.raises(FileError, match="sfcpart did not write"):
        write(tmp_path / "parts", "new", overwrite=True)
    assert contents(tmp_path / "parts") == {**complete("old"), name: "precious"}


def test_an_empty_folder_of_others_inside_is_foreign(tmp_path):
    write(tmp_path / "parts", "old")
    (tmp_path / "parts" / "mine").mkdir()
    with pytest.raises(FileError, match="sfcpart did not write mine"):
        write(tmp_path / "parts", "new", overwrite=True)


def test_changed_files_are_never_overwritten(tmp_path):
    write(tmp_path / "parts", "old")
    (tmp_path / "parts" / "b.txt").write_text("with my remarks")
    with pytest.raises(FileError, match=r"b\.txt was changed since"):
        write(tmp_path / "parts", "new", overwrite=True)


def test_a_folder_without_list_is_foreign(tmp_path):
    (tmp_path / "parts").mkdir()
    (tmp_path / "parts" / "b.txt").write_text("mine")
    with pytest.raises(FileError, match="sfcpart did not write it"):
        write(tmp_path / "parts", "new", overwrite=True)


@pytest.mark.parametrize("text", ["", "{", "[]", '{"files": 3}', '{"files": {"b.txt": null}}'])
def test_a_damaged_list_protects_the_folder(tmp_path, text):
    write(tmp_path / "parts", "old")
    (tmp_path / "parts" / MANIFEST).write_text(text)
    with pytest.raises(FileError):
        write(tmp_path / "parts", "new", overwrite=True)
    assert contents(tmp_path / "parts") == complete("old")


def test_foreign_files_that_come_while_writing_stay(tmp_path):
    write(tmp_path / "parts", "old")
    with (
        pytest.raises(FileError, match="sfcpart did not write late"),
        output_folder(tmp_path / "parts", overwrite=True) as folder,
    ):
        (folder / "b.txt").write_text("new")
        (tmp_path / "parts" / "late").write_text("precious")
    assert contents(tmp_path / "parts") == {**complete("old"), "late": "precious"}


@pytest.mark.parametrize("error", [MeshError("no cells"), KeyboardInterrupt(), ValueError("x")])
def test_a_failing_run_leaves_nothing_and_its_own_error(tmp_path, error):
    with pytest.raises(type(error)), output_folder(tmp_path / "parts") as folder:
        (folder / "b.txt").write_text("half")
        raise error
    assert list(tmp_path.iterdir()) == []


def test_errors_name_the_wanted_folder_not_the_temporary_one(tmp_path):
    with pytest.raises(FileError) as caught, output_folder(tmp_path / "parts") as folder:
        raise FileError(f"{folder / 'parts.vtkhdf'}: cannot be written")
    assert str(caught.value) == f"{tmp_path / 'parts' / 'parts.vtkhdf'}: cannot be written"


@pytest.mark.parametrize(
    ("number", "message"),
    [
        (errno.ENOSPC, "No space left on device; make room"),
        (errno.EDQUOT, "; make room"),
        (errno.EIO, "Input/output error"),
    ],
)
def test_failing_disks_are_named(tmp_path, number, message):
    with pytest.raises(FileError, match=message), output_folder(tmp_path / "parts"):
        raise OSError(number, os.strerror(number), "somewhere")
    assert list(tmp_path.iterdir()) == []


def test_wrong_places_are_refused_early(tmp_path, monkeypatch):
    (tmp_path / "file").write_text("")
    with pytest.raises(FileError, match="is a file"):
        check_output_folder(tmp_path / "file")
    with pytest.raises(FileError, match=r"because .*file is a file|Not a directory"):
        check_output_folder(tmp_path / "file" / "parts")
    with pytest.raises(FileError, match="no name"):
        check_output_folder("")
    monkeypatch.chdir(tmp_path)
    with pytest.raises(FileError, match="new folder inside it"):
        check_output_folder(".")
    with pytest.raises(FileError):
        write(Path("/proc/parts"), "new")


@pytest.mark.skipif(os.geteuid() == 0, reason="root may write everywhere")
def test_unwritable_places_are_refused_early(tmp_path):
    (tmp_path / "locked").mkdir(mode=0o500)
    with pytest.raises(FileError, match="may not be written"):
        check_output_folder(tmp_path / "locked" / "parts")


def test_a_link_to_a_folder_is_followed(tmp_path):
    write(tmp_path / "real", "old")
    (tmp_path / "link").symlink_to("real")
    write(tmp_path / "link", "new", overwrite=True)
    assert (tmp_path / "link").is_symlink()
    assert contents(tmp_path / "real") == complete("new")


def test_a_living_run_is_left_alone_and_a_dead_one_cleaned(tmp_path):
    with output_folder(tmp_path / "parts") as living:
        (living / "b.txt").write_text("slow")
        dead = tmp_path / ".parts.sfcpart-00000000.tmp"
        dead.mkdir()
        (dead / ".sfcpart-lock").write_text("")
        (dead / "half.txt").write_text("half")
        (tmp_path / ".parts.sfcpart-00000001.tmp").mkdir()
        write(tmp_path / "parts", "fast")
        assert living.exists()
        assert not dead.exists()
        write(tmp_path / "parts", "faster", overwrite=True)
        folder_module.check_output_folder(tmp_path / "parts", overwrite=True)
        (tmp_path / "parts" / MANIFEST).unlink()
        for name in ("b.txt", "inner/a.txt"):
            (tmp_path / "parts" / name).unlink()
        (tmp_path / "parts" / "inner").rmdir()
    assert contents(tmp_path / "parts") == {"b.txt": "slow"}
    assert [entry.name for entry in tmp_path.iterdir()] == ["parts"]


def test_files_of_others_with_a_like_name_are_not_cleaned(tmp_path):
    other = tmp_path / ".parts.sfcpart-mine.tmp"
    other.mkdir()
    (other / "notes.txt").write_text("precious")
    write(tmp_path / "parts", "new")
    assert contents(other) == {"notes.txt": "precious"}


def test_a_kill_between_two_renames_is_mended(tmp_path):
    write(tmp_path / "parts", "old")
    (tmp_path / "parts").rename(tmp_path / ".parts.sfcpart-00000000.old")
    with pytest.raises(MeshError), output_folder(tmp_path / "parts", overwrite=True):
        raise MeshError("no cells")
    assert contents(tmp_path / "parts") == complete("old")


CHILD = """
import sys
from sfcpart.files.parts.folder import output_folder
print("ready", flush=True)
for turn in range(10**6):
    with output_folder(sys.argv[1], overwrite=True) as folder:
        (folder / "inner").mkdir()
        for name in ("inner/a.txt", "b.txt"):
            with open(folder / name, "w") as file:
                for _ in range(40):
                    file.write(f"{turn:08d}")
                    file.flush()
"""


def test_a_kill_at_any_time_leaves_a_whole_result_or_none(tmp_path):
    chance = random.Random(11)
    for _ in range(8):
        command = [sys.executable, "-c", CHILD, str(tmp_path / "parts")]
        with subprocess.Popen(command, stdout=subprocess.PIPE) as child:
            child.stdout.readline()
            time.sleep(chance.uniform(0.0, 0.15))
            child.send_signal(signal.SIGKILL)
        if (tmp_path / "parts").exists():
            texts = set(contents(tmp_path / "parts").values())
            texts.discard("")  # the lock of the last moment, empty
            assert len(texts) == 1
            assert {len(text) for text in texts} == {320}
    write(tmp_path / "parts", "new", overwrite=True)
    assert [entry.name for entry in tmp_path.iterdir()] == ["parts"]
    assert contents(tmp_path / "parts") == complete("new")


def test_a_limit_on_file_size_is_a_full_disk(tmp_path):
    script = """
import resource, sys
from sfcpart.errors import FileError
from sfcpart.files.parts.folder import output_folder
resource.setrlimit(resource.RLIMIT_FSIZE, (100, 100))
try:
    with output_folder(sys.argv[1]) as folder:
        (folder / "b.txt").write_text("x" * 1000)
except FileError as error:
    print(error)
"""
    command = [sys.executable, "-c", script, str(tmp_path / "parts")]
    done = subprocess.run(command, capture_output=True, text=True, timeout=60)
    assert "File too large; make room" in done.stdout, done.stderr
    assert list(tmp_path.iterdir()) == []
