"""`kickrender pack` as a process of its own, and what must hold whenever it was ended."""

import json
import subprocess
import sys
import time
from pathlib import Path

from kickrender.sound.sound_file import pcm_digest_of_file


def start(pack: Path, out: Path, *options: str) -> subprocess.Popen[str]:
    command = [sys.executable, "-m", "kickrender", "pack", str(pack), "--out", str(out), *options]
    return subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, start_new_session=True)


def wait_for_files(out: Path, run: subprocess.Popen[str], count: int = 5) -> None:
    while run.poll() is None and sum(1 for _ in out.rglob("*.wav")) < count:
        time.sleep(0.005)


def assert_whole(out: Path) -> None:
    for path in out.rglob("*.wav"):
        assert pcm_digest_of_file(path), path
    for path in out.rglob("*.json"):
        json.loads(path.read_bytes())


def assert_stopped(run: subprocess.Popen[str], out: Path) -> None:
    """It was stopped by hand between two of its 300 hits: said so, and left whole files and no manifest."""
    said, complaint = run.communicate(timeout=60)
    assert (run.returncode, said) == (130, "")
    assert complaint.splitlines()[-1] == "kickrender: stopped; every file that was written is whole"
    assert "Traceback" not in complaint
    assert not (out / "pack.json").exists()
    assert not list(out.rglob("*.part"))
    assert 5 <= sum(1 for _ in out.rglob("*.wav")) < 300
    assert_whole(out)
