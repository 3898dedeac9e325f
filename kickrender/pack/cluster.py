"""Batches spread over the workers of a dask.distributed cluster, which may be other machines.

Workers send files back and this process writes them, so no disk has to be shared, and what lies in the pack's folder
is whole whatever becomes of a worker. A lost worker's batches are done again by others, which the scheduler sees to.
dask.distributed is loaded only when somebody asks for a cluster.
"""

from __future__ import annotations

import asyncio
import logging
import math
import re
import socket
import time
import warnings
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from typing import Any

from kickrender.errors import Fault, InputError, WorkerError
from kickrender.pack.sending import do_batch, state, version
from kickrender.pack.workers import Job, Out, Progress, Work

CONNECT_S = 4.0  # for each step: reaching the port, the scheduler, a first worker
ALONE_S = 15.0  # without any worker before a run is given up; one that is started again takes some seconds
COUNT_EVERY_S = 1.0
_QUEUED_PER_WORKER = 2  # enough to keep a worker busy, few enough that memory does not grow with the pack
_ADDRESS = re.compile(r"((tcp|tls)://)?([\w.-]+|\[[0-9A-Fa-f:.]+\]):(\d{1,5})")
_AGAIN = "; the files that were written are whole, run again to render the rest"


class Cluster:
    """Workers that were asked for their version and have the one that is here; see `connect`."""

    def __init__(self, client: Any, address: str) -> None:
        self._client, self._address = client, address
        self.version = version()
        self.count = 0  # worker processes
        self._counted_at = -math.inf
        self.uncompiled = 0  # of these, how many will compile the solver before their first hit

    def run(self, batches: Iterable[Job], work: Work[Job, Out], progress: Progress) -> Iterator[Out]:
        """Outcomes of every batch, in no particular order; see `kickrender.pack.workers.run_batches`.

        Raises
        ------
        WorkerError
            If the scheduler or every worker is lost, one joined that is of another version, or a batch ends whoever
            tries it.
        """
        queue = iter(batches)
        waiting: set[Any] = set()
        try:
            while True:
                room = _QUEUED_PER_WORKER * max(1, self._counted()) - len(waiting)
                for batch in (batch for _, batch in zip(range(room), queue, strict=False)):
                    waiting.add(self._client.submit(do_batch, work, batch, self.version, pure=False))
                if not waiting:
                    return
                for future in self._finished(waiting):
                    outcomes = self._outcomes(future)
                    waiting.remove(future)
                    future.release()  # its worker need not keep them any longer
                    progress(len(outcomes))
                    yield from outcomes
        finally:
            for future in waiting:
                future.release()  # whoever is at it stops after the file at hand

    def check(self) -> None:
        """Ask every worker for its version.

        Raises
        ------
        WorkerError
            If one has another version than this process: every such worker, and what it has.
        """
        answers = self._ask(self._client.run, state, on_error="return")
        strangers = [w for w, answer in answers.items() if not isinstance(answer, tuple) or answer[0] != self.version]
        if strangers:
            raise WorkerError("\n".join(self._refusal(worker, answers[worker]) for worker in strangers))
        self.count = len(answers)
        self.uncompiled = sum(not compiled for _, compiled in answers.values())

    def _refusal(self, worker: str, answer: object) -> str:
        if isinstance(answer, tuple):
            found = str(answer[0])
        else:  # of a version that cannot be asked for more than this, or no kickrender at all
            installed = self._ask(self._client.run, eval, "__import__('kickrender').__version__", workers=[worker],
                                  on_error="return")[worker]  # fmt: skip
            found = f"kickrender {installed} of other code" if isinstance(installed, str) else f"none ({installed})"
        return f"cluster {self._address}: worker {worker} has {found}; allowed: what is here, {self.version}"

    def _finished(self, waiting: set[Any]) -> set[Any]:
        """Those of the batches that are done; looks now and then whether anybody is left to do the others."""
        import distributed

        seen = time.monotonic()
        while True:
            try:
                done: set[Any] = self._ask(distributed.wait, waiting, COUNT_EVERY_S, "FIRST_COMPLETED").done
                return done
            except TimeoutError:
                pass
            if self._counted():
                seen = time.monotonic()
            elif time.monotonic() - seen > ALONE_S:
                raise WorkerError(f"cluster {self._address}: every worker is gone{_AGAIN}")

    def _counted(self) -> int:
        """How many workers there are by now; some may have joined, or be gone."""
        if time.monotonic() - self._counted_at >= COUNT_EVERY_S:
            self.count = len(self._ask(self._client.nthreads))
            self._counted_at = time.monotonic()
        return self.count

    def _outcomes(self, future: Any) -> list[Any]:
        import distributed

        if future.status != "error":
            outcomes: list[Any] = self._ask(future.result)
            return outcomes
        error = self._ask(future.exception)
        self.check()  # one of another version may have joined since, and fail in any way
        if isinstance(error, distributed.KilledWorker):
            raise WorkerError(
                f"cluster {self._address}: a batch of hits ended {error.allowed_failures + 1} workers that tried it, "
                f"perhaps for want of memory{_AGAIN}"
            )
        raise error

    def _ask(self, question: Callable[..., Any], *arguments: Any, **options: Any) -> Any:
        """What the scheduler answers; raises WorkerError when it is gone."""
        import distributed

        try:
            return question(*arguments, **options)
        except TimeoutError:  # an OSError too, but of one who waits
            raise
        except (OSError, distributed.client.CancelledError):
            raise WorkerError(f"cluster {self._address}: the scheduler is gone{_AGAIN}") from None


@contextmanager
def connect(address: str) -> Iterator[Cluster]:
    """A cluster's workers, all of them of this very version, until the block is left.

    Parameters
    ----------
    address : str
        Of the scheduler: "tcp://HOST:PORT", "tls://HOST:PORT" or "HOST:PORT".

    Raises
    ------
    InputError
        If that is no address, or dask.distributed is not installed.
    WorkerError
        If nobody answers there, no worker is connected to it, or one is of another version.
    """
    found = _ADDRESS.fullmatch(address)
    if not found or not 0 < int(found[4]) < 65536:
        raise InputError(
            Fault("--cluster", f"found '{address}'", "a scheduler's address, such as tcp://127.0.0.1:8786")
        )
    try:
        import distributed
    except ImportError:
        raise InputError(
            Fault("--cluster", "dask.distributed is not installed; pip install 'kickrender[cluster]' installs it")
        ) from None
    with _quiet():
        _check_scheduler(address, found[3].strip("[]"), int(found[4]))
        try:
            client = distributed.Client(address, timeout=CONNECT_S, set_as_default=False)
        except OSError as error:
            raise WorkerError(f"cluster {address}: the scheduler does not take us: {error}") from None
        try:
            try:
                client.wait_for_workers(1, timeout=CONNECT_S)
            except TimeoutError:
                raise WorkerError(
                    f"cluster {address}: the scheduler has no workers; start some with: dask worker {address} "
                    "--nworkers 2 --nthreads 1"
                ) from None
            cluster = Cluster(client, address)
            cluster.check()
            with client.as_current():
                yield cluster
        finally:
            client.close(timeout=CONNECT_S)


def _check_scheduler(address: str, host: str, port: int) -> None:
    """Find out in bounded time whether a scheduler listens there; raises WorkerError.

    The library tries again and again where nobody listens, and waits for ever where somebody does who says nothing.
    """
    import distributed

    async def kind() -> object:
        security = distributed.Security().get_connection_args("client")
        async with distributed.rpc(address, connection_args=security) as server:
            return (await server.identity())["type"]

    try:
        socket.create_connection((host, port), timeout=CONNECT_S).close()
    except OSError as error:
        raise WorkerError(f"cluster {address}: nobody answers there ({error.strerror or error})") from None
    try:
        found = asyncio.run(asyncio.wait_for(kind(), CONNECT_S))
    except Exception:  # whatever comes of speaking to a stranger: nonsense read as a size asks for too much memory
        found = None
    if found != "Scheduler":
        raise WorkerError(f"cluster {address}: what answers there is no scheduler of dask.distributed")


@contextmanager
def _quiet() -> Iterator[None]:
    """Keep what the library has to say to itself: what matters becomes an error of ours."""
    from distributed.utils import silence_logging_cmgr

    with warnings.catch_warnings(), silence_logging_cmgr(logging.CRITICAL):
        warnings.simplefilter("ignore")
        yield
