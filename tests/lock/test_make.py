"""Making lock files: the same text however made, and an older file whole whatever happens."""

import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest

import kickrender
from kickrender.errors import InputError, WriteError
from kickrender.lock.make import NotLocked, check_target, lock_path, pack_name, write_lock
from kickrender.lock.text import read_lock
from kickrender.pack.read import read_pack
from tests.lock.conftest import Edit, lock_in, plan_in, verify_in
from tests.lock.texts import BELLS, GONGS


def test_the_file_is_the_same_for_any_number_of_workers(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("kickrender.lock.work.FEWEST_PER_WORKER", 2)
    texts = []
    for jobs in (1, 2):
        write_lock(plan_in(folder), folder / "bells.lock", "bells.toml", jobs=jobs)
        texts.append((folder / "bells.lock").read_bytes())
    assert texts[0] == texts[1]
    assert list(read_lock(folder / "bells.lock").hits) == [*BELLS, *GONGS]


@pytest.mark.parametrize("audio", [False, True])
def test_stopped_by_hand_it_leaves_the_old_file_whole(folder: Path, edit: Edit, audio: bool) -> None:
    lock_in(folder, audio)
    before = (folder / "bells.lock").read_bytes()
    edit("bell.toml", '"1u"', '"2u"')

    def stop(hits: int) -> None:
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        write_lock(plan_in(folder), folder / "bells.lock", "bells.toml", audio=audio, progress=stop)
    assert (folder / "bells.lock").read_bytes() == before
    assert not list(folder.rglob("*.part"))
    edit("bell.toml", '"2u"', '"1u"')
    assert verify_in(folder).passes()  # the renders that it speaks of are whole too


@pytest.mark.slow
def test_killed_at_any_moment_it_leaves_the_old_file_or_the_new(folder: Path, edit: Edit) -> None:
    edit("bells.toml", '["10k", "15k"]', "{ from = 1e4, to = 2e4, steps = 40 }")
    edit("bells.toml", '["2V", "5V"]', "{ from = 2, to = 5, steps = 4 }")
    lock_in(folder, audio=True)
    before = (folder / "bells.lock").read_bytes()
    edit("bell.toml", '"1u"', '"1.5u"')
    command = [sys.executable, "-m", "kickrender", "lock", str(folder / "bells.toml"), "--audio", "--jobs", "1"]
    killed = 0
    for wait_s in (0.5, 1.0, 1.5, 2.0, 2.5):
        run = subprocess.Popen(command, stdout=subprocess.DEVNULL, stderr=subprocess.DEVNULL, start_new_session=True)
        time.sleep(wait_s)
        if run.poll() is None:
            os.killpg(run.pid, signal.SIGKILL)
            killed += 1
        run.wait()
        lock = read_lock(folder / "bells.lock")
        assert len(lock.hits) == 320
        if (folder / "bells.lock").read_bytes() != before:
            break
        assert lock.audio_folder
    assert killed
    lock_in(folder, audio=True)
    assert not list((folder / "bells.audio").rglob("*.part"))


def test_a_write_that_fails_leaves_the_old_file_whole(
    folder: Path, edit: Edit, monkeypatch: pytest.MonkeyPatch
) -> None:
    lock_in(folder)
    before = (folder / "bells.lock").read_bytes()
    edit("bell.toml", '"1u"', '"2u"')

    def full(*_: object) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr("kickrender.sound.files.os.replace", full)
    with pytest.raises(WriteError, match="No space left"):
        lock_in(folder)
    assert (folder / "bells.lock").read_bytes() == before
    assert not list(folder.rglob("*.part"))


def test_hits_that_fail_leave_the_old_file_whole_and_are_named(folder: Path, edit: Edit) -> None:
    edit("bells.toml", 'target = "-20 LUFS"', 'measure = "none"')
    lock_in(folder)
    before = (folder / "bells.lock").read_bytes()
    edit("gong.toml", '"0.5V"', '"1mV"')
    with pytest.raises(NotLocked, match=r"(?s)gong/10k-2V: pcm24.*full scale.*was not written: 4 of 8 hits failed"):
        lock_in(folder)
    assert (folder / "bells.lock").read_bytes() == before


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[[package]]\n", "exists and is no lock file of kickrender's"),
        ("kickrender lock 2\nfuture\n", r"(?s)cannot be read, so it is left alone.*:1: a lock file of version 2"),
        ("kickrender lock 1\npack a\n", r"(?s)cannot be read, so it is left alone.*:2: the file ends before"),
    ],
)
def test_a_file_that_cannot_be_read_is_left_alone(text: str, message: str, folder: Path) -> None:
    (folder / "bells.lock").write_text(text)
    with pytest.raises(InputError, match=message):
        lock_in(folder)
    assert (folder / "bells.lock").read_text() == text
    with pytest.raises(WriteError, match="no such folder"):
        check_target(folder / "none" / "bells.lock")


def test_kept_renders_follow_the_lock_file(folder: Path, edit: Edit) -> None:
    lock_in(folder, audio=True)
    first = {path.name for path in (folder / "bells.audio").rglob("*.flac")}
    edit("bell.toml", '"1u"', '"1.5u"')
    lock_in(folder, audio=True)
    second = {path.name for path in (folder / "bells.audio").rglob("*.flac")}
    assert len(first) == len(second) == 8
    assert len(first & second) == 4


def test_where_a_lock_file_lies_and_what_it_calls_its_pack(folder: Path) -> None:
    path = folder / "bells.toml"
    assert lock_path(read_pack(path), str(path)) == folder / "bells.lock"
    assert pack_name(read_pack(path), str(path), folder / "locks" / "a.lock") == "../bells.toml"
    assert lock_path(read_pack("night-ferry"), "night-ferry") == Path("night-ferry.lock")
    assert pack_name(read_pack("night-ferry"), "night-ferry", folder / "a.lock") == "night-ferry"


def test_the_same_from_python(folder: Path) -> None:
    locked = kickrender.lock_pack(folder / "bells.toml", folder / "bells.lock", audio=True)
    assert list(locked.hits) == [*BELLS, *GONGS]
    assert kickrender.verify_pack(folder / "bells.toml", folder / "bells.lock").passes()


def test_goals_layers_takes_and_strikes_are_held_still_too(folder: Path, edit: Edit) -> None:
    edit("bell.toml", 'full_scale = "0.5V"', 'full_scale = "0.5V"\n[goals]\npitch = "size"')
    size = '[controls.size]\nsets = "C1"\nfrom = "0.2u"\nto = "4u"\nlaw = "geometric"\nstart = "1u"\n'
    edit("bell.toml", "[output]", size + "[output]")
    edit("bells.toml", '["bell.toml", "gong.toml"]', '"bell.toml"')
    edit("bells.toml", 'R1 = ["10k", "15k"]', "pitch = { hertz = [90, 120] }")
    edit("bells.toml", "[files]", '[takes]\ncount = 2\nseed = 7\n[takes.spread]\nresistor = "5%"\n[files]')
    edit("bells.toml", "{R1}-{accent}", "{pitch}-{accent}-{take}")
    locked = lock_in(folder)
    settings = [hit.settings for hit in locked.hits.values()]
    assert len({tuple(fields.items()) for fields in settings}) == len(settings) == 8
    assert all("size" in fields and "spread:R1.value" in fields for fields in settings)
    assert verify_in(folder).passes()
    edit("bells.toml", "5%", "6%")
    causes = {str(cause).split()[1].split(":")[0] for v in verify_in(folder).verdicts for cause in v.causes}
    assert "spread" in causes
