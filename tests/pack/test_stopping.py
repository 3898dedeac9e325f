"""Runs that end early: stopped by hand, killed, out of room, a worker lost. Whole files only, and a rerun finishes."""

import json
import os
import random
import resource
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from kickrender.errors import WorkerError
from kickrender.pack.batches import Batch, batches_of, groups_of
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack
from kickrender.pack.render import Outcome, Stop
from kickrender.pack.workers import run_batches
from tests.pack.folders import contents
from tests.pack.running import assert_stopped, assert_whole, start, wait_for_files


def assert_a_rerun_finishes(pack: Path, out: Path) -> None:
    run = start(pack, out, "--jobs", "1")
    said, complaint = run.communicate(timeout=120)
    assert run.returncode == 0, complaint
    assert f"{out}: 300 hits, " in said
    assert not list(out.rglob("*.part"))
    assert len(json.loads((out / "pack.json").read_bytes())["hits"]) == 300
    assert_whole(out)


@pytest.mark.slow
@pytest.mark.parametrize("jobs", ["1", "2"])
def test_ctrl_c_leaves_whole_files_and_a_rerun_finishes(jobs: str, many: Path) -> None:
    out = many.parent / "out"
    run = start(many, out, "--jobs", jobs)
    wait_for_files(out, run)
    os.killpg(run.pid, signal.SIGINT)  # as a terminal does it: to the workers too
    assert_stopped(run, out)
    assert_a_rerun_finishes(many, out)


@pytest.mark.slow
@pytest.mark.parametrize("jobs", ["1", "2"])
def test_after_kills_at_random_points_a_rerun_gives_the_same_pack(
    jobs: str, many: Path, many_rendered: dict[str, bytes]
) -> None:
    """Killed early, late, and when every hit is there and the manifest or the sheets are being written."""
    out = many.parent / "out"
    points = [random.randrange(1, 100), random.randrange(130, 250), 300]
    for point in points:
        run = start(many, out, "--jobs", jobs)
        wait_for_files(out, run, point)
        time.sleep(random.uniform(0, 0.01))  # anywhere between two files, or within one
        run.kill()
        try:
            run.communicate(timeout=20)  # ends when the last process that holds the pipe has ended
        except subprocess.TimeoutExpired:
            os.killpg(run.pid, signal.SIGKILL)
            run.communicate()
            pytest.fail("a worker still runs after its parent was killed")
        assert point == 300 or run.returncode == -signal.SIGKILL, points
        assert_whole(out)
    assert_a_rerun_finishes(many, out)
    assert contents(out) == many_rendered, points


@pytest.mark.slow
def test_after_kills_a_rerun_leaves_out_the_same_duplicates(many: Path) -> None:
    """Killed while hits are rendered, and while those left out are taken away again, which pack.json has told of."""
    whole, out = many.parent / "whole", many.parent / "out"
    text = many.read_text().replace("steps = 100", "steps = 40")
    many.write_text(f"{text}[duplicates]\nbelow = -20\n")  # which neighbours then are
    options = ("--jobs", "1", "--drop-duplicates")
    expected, complaint = start(many, whole, *options).communicate(timeout=120)
    assert "near duplicates left out" in expected, complaint
    for until in ("files", "manifest"):
        run = start(many, out, *options)
        wait_for_files(out, run, random.randrange(1, 100) if until == "files" else 120)
        while until == "manifest" and run.poll() is None and not (out / "pack.json").exists():
            time.sleep(0.0005)
        time.sleep(random.uniform(0, 0.01))
        run.kill()
        run.communicate(timeout=20)
    said, complaint = start(many, out, *options).communicate(timeout=120)
    assert said.split(",")[0].split(": ")[1] == expected.split(",")[0].split(": ")[1], complaint
    assert contents(out) == contents(whole)


@pytest.mark.parametrize(("room", "file"), [(500, "1V.wav"), (3000, "1V.json")])
def test_a_full_disk_is_one_message_and_leaves_nothing_half_written(room: int, file: str, many: Path) -> None:
    out = many.parent / "out"
    program = (
        "import resource, sys; from kickrender.cli.main import main; "
        f"resource.setrlimit(resource.RLIMIT_FSIZE, ({room}, {room})); sys.exit(main())"
    )
    assert resource.getrlimit(resource.RLIMIT_FSIZE)[1] == resource.RLIM_INFINITY
    command = [sys.executable, "-c", program, "pack", str(many), "--out", str(out), "--jobs", "1"]
    done = subprocess.run(command, capture_output=True, text=True, timeout=120)
    assert done.returncode == 1
    (line,) = [line for line in done.stderr.splitlines() if line.startswith("kickrender:")]
    assert line.endswith(f"0.0000/{file}: File too large")
    assert [path for path in out.rglob("*") if path.is_file()] == []


def die(batch: Batch, stop: Stop) -> Iterator[Outcome]:
    os._exit(9)
    yield Outcome("")


def test_a_lost_worker_is_told(many: Path) -> None:
    plan = plan_pack(read_pack(many))
    batches = batches_of(plan, many.parent, groups_of(plan.hits), 2, {})
    with pytest.raises(WorkerError, match=r"a worker process died, perhaps for want of memory.* run again"):
        list(run_batches(batches, die, 2, lambda hits: None))


def tell_handler(batch: Batch, stop: Stop) -> Iterator[Outcome]:
    yield Outcome(str(signal.getsignal(signal.SIGINT)))


def test_ctrl_c_reaches_the_parent_only(many: Path) -> None:
    plan = plan_pack(read_pack(many))
    batches = batches_of(plan, many.parent, groups_of(plan.hits), 2, {})
    outcomes = run_batches(batches, tell_handler, 2, lambda hits: None)
    assert {outcome.name for outcome in outcomes} == {str(signal.SIG_IGN)}
