"""`kickrender pack --cluster` where there is no cluster: one message each, and nothing is begun."""

import socket
import sys
import threading
from pathlib import Path

import pytest

from kickrender.pack import cluster
from tests.cli.conftest import Run


def pack(run: Run, address: str, *options: str) -> tuple[int, str]:
    ran = run("pack", "pack.toml", "--out", "out", "--cluster", address, *options)
    assert ran.out == ""
    assert not Path("out").exists()
    return ran.code, ran.err


@pytest.mark.parametrize("address", ["", "nowhere", "tcp://:8786", "http://here:8786", "here:0", "here:65536", "a b:1"])
def test_no_address_is_wrong_input(address: str, run: Run, folder: Path) -> None:
    allowed = "a scheduler's address, such as tcp://127.0.0.1:8786"
    assert pack(run, address) == (2, f"kickrender: --cluster: found '{address}'; allowed: {allowed}\n")


def test_jobs_are_for_this_machine(run: Run, folder: Path) -> None:
    wanted = "kickrender pack: --jobs and --cluster; allowed: one of them\n"
    assert pack(run, "127.0.0.1:1", "--jobs", "2") == (2, wanted)


def test_a_missing_library_is_told_with_its_remedy(run: Run, folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    remedy = "dask.distributed is not installed; pip install 'kickrender[cluster]' installs it"
    assert pack(run, "127.0.0.1:1") == (2, f"kickrender: --cluster: {remedy}\n")


def free_port() -> int:
    with socket.socket() as taken:
        taken.bind(("127.0.0.1", 0))
        return int(taken.getsockname()[1])


def test_an_address_where_nobody_listens_is_told(run: Run, folder: Path) -> None:
    address = f"tcp://127.0.0.1:{free_port()}"
    assert pack(run, address) == (1, f"kickrender: cluster {address}: nobody answers there (Connection refused)\n")


@pytest.mark.parametrize("says", [b"", b"some other service\r\n" * 9])
def test_whoever_is_no_scheduler_is_told(says: bytes, run: Run, folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(cluster, "CONNECT_S", 1.0)
    with socket.socket() as server:
        server.bind(("127.0.0.1", 0))
        server.listen()

        def answer() -> None:
            callers = [server.accept()[0] for _ in range(2)]  # one to try the port, one to ask who is there
            callers[1].sendall(says)
            callers[1].recv(1 << 20)
            while callers[1].recv(1 << 20):
                pass
            for caller in callers:
                caller.close()

        thread = threading.Thread(target=answer, daemon=True)
        thread.start()
        address = f"127.0.0.1:{server.getsockname()[1]}"
        wanted = f"kickrender: cluster {address}: what answers there is no scheduler of dask.distributed\n"
        assert pack(run, address) == (1, wanted)
        thread.join(10)
