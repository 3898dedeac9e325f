"""What a worker on another machine does for a pack, and what it sends: finished files, for the one who asked to write.

The worker's own code writes the files, into a folder of its own that is gone afterwards, so they are the files of a
run on one machine whatever their format; and no disk has to be shared.
"""

from __future__ import annotations

import functools
import socket
import tempfile
import threading
from collections.abc import Iterator, Mapping
from dataclasses import asdict, dataclass, replace
from pathlib import Path

import kickrender
from kickrender.engine import ENGINE_VERSION
from kickrender.errors import WorkerError, WriteError
from kickrender.pack.batches import Batch
from kickrender.pack.render import Outcome, Stop, render_batch
from kickrender.pack.workers import Job, Out, Work
from kickrender.sound.code import CODE_FOLDERS, code_digest
from kickrender.sound.files import make_folder, write_whole
from kickrender.sound.sidecar import check_ours
from kickrender.sound.warm_up import is_compiled, warm_up

# A worker process may have threads; more than one batch in it would only take more memory.
_one_at_a_time = threading.Lock()


@dataclass(frozen=True)
class Version:
    """All that decides what a hit's files are: the versions of kickrender, its engine and the library that packs FLAC,
    and a digest of the code."""

    kickrender: str
    engine: str
    libsndfile: str
    code: str

    def __str__(self) -> str:
        return ", ".join(f"{name} {value}" for name, value in asdict(self).items())


def version() -> Version:
    """The version of this process."""
    import soundfile

    library = soundfile.__libsndfile_version__
    return Version(kickrender.__version__, ENGINE_VERSION, library, code_digest((*CODE_FOLDERS, "pack")))


def state() -> tuple[Version, bool]:
    """The version of this process, and whether its solver is compiled."""
    return version(), is_compiled()


@dataclass(frozen=True)
class Sent:
    """What became of one hit, and its files: path below the pack's folder -> contents, the sidecar last."""

    outcome: Outcome
    files: Mapping[str, bytes]


def send_batch(batch: Batch, stop: Stop) -> Iterator[Sent]:
    """Render every hit of a batch and send its files; ends early when `stop()` is true."""
    with tempfile.TemporaryDirectory(prefix="kickrender-") as name:
        folder = Path(name)
        for outcome in render_batch(replace(batch, folder=folder), stop):
            made = sorted((p for p in folder.rglob("*") if p.is_file()), key=lambda path: path.suffix == ".json")
            files = {path.relative_to(folder).as_posix(): path.read_bytes() for path in made}
            for path in made:
                path.unlink()
            failure = f"worker on {socket.gethostname()}: {outcome.failure}" if outcome.fatal else outcome.failure
            yield Sent(replace(outcome, failure=failure), files)


def receive(sent: Sent, folder: Path) -> Outcome:
    """Write the files of one hit into the pack's folder: all of them, or none."""
    written: list[Path] = []
    try:
        for name in sent.files:
            if name.endswith(".json"):
                check_ours(folder / name)
        for name, content in sent.files.items():
            path = folder / name
            make_folder(path.parent)
            write_whole(path, content)
            written.append(path)
    except WriteError as error:
        for path in written:
            path.unlink(missing_ok=True)
        return Outcome(sent.outcome.name, str(error), fatal=True)
    return sent.outcome


def do_batch(work: Work[Job, Out], batch: Job, wanted: Version) -> list[Out]:
    """The outcomes of a batch, as a task of a cluster; fewer when nobody wants them any more.

    Raises
    ------
    WorkerError
        If this process is of another version than whoever asks.
    """
    if version() != wanted:
        raise WorkerError(f"this worker has {version()}")
    with _one_at_a_time:
        _ready()
        return list(work(batch, _stop_of_task()))


@functools.cache
def _ready() -> None:
    """Compile, or load what is compiled, once in a process."""
    warm_up()


def _stop_of_task() -> Stop:
    """Whether the task that this thread is at has been given up: by hand, or because whoever asked for it is gone."""
    from distributed import get_worker

    worker = get_worker()
    key = worker.get_current_task()

    def stop() -> bool:
        task = worker.state.tasks.get(key)
        return task is None or task.state == "cancelled"

    return stop
