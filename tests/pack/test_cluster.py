"""Packs rendered by a cluster on this machine: a scheduler and workers, each a process of its own.

The truth is a run without a cluster: the same files to the byte, whatever becomes of a worker.
"""

from __future__ import annotations

import json
import os
import re
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from pathlib import Path

import distributed
import pytest

import kickrender
from kickrender.errors import WorkerError
from kickrender.pack import batches, tuning
from kickrender.pack import cluster as cluster_module
from kickrender.pack.cluster import connect
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack, read_pack_text
from kickrender.pack.render import Stop
from kickrender.pack.run import render_plan
from kickrender.pack.sending import send_batch, version
from tests.pack.folders import contents
from tests.pack.running import assert_stopped, assert_whole, start, wait_for_files
from tests.pack.test_stopping import die
from tests.pack.test_tuned_pack import PACK as BY_EAR
from tests.pack.texts import PACK
from tests.tunable_bell import BELL

pytestmark = pytest.mark.slow

ROOT = Path(__file__).resolve().parents[2]


class Processes:
    """A scheduler and its workers, none of them left behind."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.running: list[subprocess.Popen[bytes]] = []
        self.scheduler = self._start("scheduler", "--port", "0", "--scheduler-file", str(folder / "scheduler.json"))
        while not (folder / "scheduler.json").exists():
            assert self.scheduler.poll() is None
            time.sleep(0.05)
        self.address = json.loads((folder / "scheduler.json").read_text())["address"]

    def add_worker(self, name: str, path: Path | None = None) -> subprocess.Popen[bytes]:
        """One more worker; `path` is where it looks for modules first."""
        where = os.pathsep.join(map(str, filter(None, [path, os.environ.get("PYTHONPATH")])))
        own = ["--name", name, "--nthreads", "1", "--no-nanny", "--local-directory", str(self.folder / name)]
        return self._start("worker", self.address, *own, PYTHONPATH=where)

    def _start(self, kind: str, *options: str, **environment: str) -> subprocess.Popen[bytes]:
        command = [sys.executable, "-m", "dask", kind, "--host", "127.0.0.1", "--no-dashboard", *options]
        log = (self.folder / f"{len(self.running)}.log").open("wb")
        process = subprocess.Popen(command, stdout=log, stderr=log, cwd=self.folder, env=os.environ | environment)
        log.close()
        self.running.append(process)
        return process

    def wait_for(self, workers: int) -> None:
        with distributed.Client(self.address, set_as_default=False) as client:
            client.wait_for_workers(workers, timeout=60)

    def stop(self) -> None:
        for process in self.running:
            process.kill()
        for process in self.running:
            process.wait()


@pytest.fixture(scope="module")
def two(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Processes]:
    """A cluster with two workers at first; a test that ends one adds another."""
    found = Processes(tmp_path_factory.mktemp("two"))
    for name in ("first", "second"):
        found.add_worker(name)
    found.wait_for(2)
    yield found
    found.stop()


@pytest.fixture
def none(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Processes]:
    """A scheduler without workers."""
    found = Processes(tmp_path_factory.mktemp("none"))
    yield found
    found.stop()


def until(holds: Callable[[], bool]) -> None:
    end = time.monotonic() + 60
    while not holds():
        assert time.monotonic() < end
        time.sleep(0.05)


TASKS = "sum(len(worker.state.tasks) for worker in __import__('distributed').Worker._instances)"


def wait_for_tasks(address: str) -> None:
    """Wait until no worker has anything left to do."""
    with distributed.Client(address, set_as_default=False) as client:
        until(lambda: not any(client.run(eval, TASKS).values()))


def test_a_killed_workers_hits_are_made_by_others(two: Processes, many: Path, many_rendered: dict[str, bytes]) -> None:
    out = many.parent / "out"
    run = start(many, out, "--cluster", two.address)
    wait_for_files(out, run)
    two.running[-1].kill()
    made = sum(1 for _ in out.rglob("*.wav"))
    said, complaint = run.communicate(timeout=120)
    assert 5 <= made < 300
    assert (run.returncode, complaint) == (0, "")
    assert said == f"{out}: 300 hits, 300 of them rendered now\n"
    assert contents(out) == many_rendered
    two.add_worker("third")
    two.wait_for(2)


def test_ctrl_c_leaves_whole_files_and_stops_the_tasks(two: Processes, many: Path) -> None:
    out = many.parent / "out"
    run = start(many, out, "--cluster", two.address)
    wait_for_files(out, run)
    os.killpg(run.pid, signal.SIGINT)
    assert_stopped(run, out)
    wait_for_tasks(two.address)


def test_goals_layers_and_large_groups_are_as_at_home(
    two: Processes, folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(tuning, "cache_folder", lambda path: folder / "cache")
    (folder / "bell.toml").write_text(BELL)
    by_ear = plan_pack(read_pack_text(BY_EAR, "p.toml", folder))
    plain = plan_pack(read_pack_text(PACK, "p.toml", folder))
    told: list[int] = []
    with connect(two.address) as cluster:
        render_plan(by_ear, folder / "there", progress=told.append, cluster=cluster)
        monkeypatch.setattr(cluster_module, "COUNT_EVERY_S", 0.05)
        cluster.count = 1  # as if the other had only just joined
        monkeypatch.setattr(batches, "MOST_HITS", 2)  # groups of three: measured first
        monkeypatch.setattr(batches, "FEWEST_HITS", 1)
        render_plan(plain, folder / "plain-there", cluster=cluster)
        assert cluster.count == 2
    monkeypatch.undo()
    render_plan(by_ear, folder / "here")
    render_plan(plain, folder / "plain-here")
    assert sum(told) == len(by_ear.hits)
    assert contents(folder / "there") == contents(folder / "here")
    assert contents(folder / "plain-there") == contents(folder / "plain-here")


def other_code(folder: Path) -> Path:
    """A kickrender of the same version with one line more."""
    shutil.copytree(Path(kickrender.__file__).parent, folder / "kickrender", ignore=shutil.ignore_patterns("*.pyc"))
    with (folder / "kickrender" / "sound" / "level.py").open("a") as file:
        file.write("# another line\n")
    return folder


def old_version(folder: Path) -> Path:
    """A kickrender that knows nothing of clusters."""
    (folder / "kickrender").mkdir(parents=True)
    (folder / "kickrender" / "__init__.py").write_text('__version__ = "0.0.9"\n')
    return folder


def test_workers_of_other_versions_are_refused(none: Processes) -> None:
    none.add_worker("changed", other_code(none.folder / "changed-code"))
    none.add_worker("old", old_version(none.folder / "old-code"))
    none.wait_for(2)
    with pytest.raises(WorkerError) as caught, connect(none.address):
        pass
    assert caught.value.exit_code == 1
    ours, where = version(), "cluster tcp://PORT: worker tcp://PORT has"
    told = sorted(re.sub(r"127\.0\.0\.1:\d+", "PORT", line) for line in str(caught.value).splitlines())
    assert told[0] == f"{where} kickrender 0.0.9 of other code; allowed: what is here, {ours}"
    begin = f"{where} {ours}".removesuffix(ours.code)
    assert re.fullmatch(f"{begin}[0-9a-f]{{16}}; allowed: what is here, {ours}", told[1])
    assert not told[1].startswith(begin + ours.code)


def test_a_late_worker_of_another_version_ends_the_run(none: Processes, many: Path) -> None:
    none.add_worker("good")
    none.wait_for(1)
    with connect(none.address) as cluster:
        none.add_worker("changed", other_code(none.folder / "changed-code"))
        none.wait_for(2)
        with pytest.raises(WorkerError, match=rf"has kickrender {kickrender.__version__}, .*; allowed: what is here"):
            render_plan(plan_pack(read_pack(many)), many.parent / "out", cluster=cluster)
    assert_whole(many.parent / "out")
    assert not (many.parent / "out" / "pack.json").exists()


def test_what_is_lost_is_told(none: Processes, many: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster_module, "ALONE_S", 1.0)
    worker = none.add_worker("only")
    none.wait_for(1)
    with connect(none.address) as cluster:
        worker.kill()
        with pytest.raises(WorkerError, match="every worker is gone; the files that were written are whole, run again"):
            list(cluster.run(range(3), send_batch, lambda hits: None))
        none.scheduler.kill()
        with pytest.raises(WorkerError, match="the scheduler is gone; the files that were written are whole"):
            list(cluster.run(range(3), send_batch, lambda hits: None))


def wait_for_stop(batch: int, stop: Stop) -> Iterator[int]:
    """A worker's work: the first batch is done at once, the next only when it is stopped."""
    while batch and not stop():
        time.sleep(0.01)
    yield batch


def test_a_task_is_stopped_and_one_that_ends_its_workers_is_told(
    tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setenv("DASK_DISTRIBUTED__SCHEDULER__ALLOWED_FAILURES", "0")
    found = Processes(tmp_path_factory.mktemp("dying"))
    try:
        found.add_worker("dies", ROOT)
        found.wait_for(1)
        with connect(found.address) as cluster:
            run = cluster.run(range(2), wait_for_stop, lambda hits: None)
            assert next(run) == 0
            run.close()  # type: ignore[attr-defined]
            wait_for_tasks(found.address)
            with pytest.raises(WorkerError, match="a batch of hits ended 1 workers that tried it, perhaps for want of"):
                list(cluster.run([0], die, lambda hits: None))
    finally:
        found.stop()


def test_a_scheduler_without_workers_is_told(none: Processes, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster_module, "CONNECT_S", 1.0)
    with pytest.raises(WorkerError) as caught, connect(none.address):
        pass
    assert str(caught.value) == (
        f"cluster {none.address}: the scheduler has no workers; start some with: dask worker {none.address} "
        "--nworkers 2 --nthreads 1"
    )
