"""Files as a worker sends them and as they are received: those of a run at home, all of a hit's or none."""

from dataclasses import replace
from pathlib import Path

import pytest

from kickrender.errors import WriteError
from kickrender.pack import sending
from kickrender.pack.batches import batches_of, groups_of
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.render import Outcome
from kickrender.pack.run import render_plan
from kickrender.pack.sending import Sent, receive, send_batch
from tests.pack.folders import contents, hit_files
from tests.pack.texts import PACK


def test_what_is_sent_is_what_would_have_been_written(folder: Path) -> None:
    plan = plan_pack(read_pack_text(PACK, "p.toml", folder))
    (batch,) = batches_of(plan, Path("nowhere"), groups_of(plan.hits), 1, {})
    sent = list(send_batch(batch, lambda: False))
    assert [list(one.files) for one in sent] == [[f"{hit.name}.wav", f"{hit.name}.json"] for hit in plan.hits]
    assert [receive(one, folder / "there").failure for one in sent] == [""] * len(plan.hits)
    render_plan(plan, folder / "here")
    assert contents(folder / "there") == hit_files(folder / "here")


def test_a_hit_that_fails_sends_its_reason_and_no_file(folder: Path) -> None:
    text = PACK.replace('{ from = "1V", to = "5V", steps = 3 }', '["0V"]')
    plan = plan_pack(read_pack_text(text, "p.toml", folder))
    (batch,) = batches_of(plan, Path(), groups_of(plan.hits), 1, {})
    sent = list(send_batch(batch, lambda: False))
    assert [(one.outcome.failure, dict(one.files)) for one in sent] == [
        ("no momentary level: the sound is silent", {})
    ] * 2


def test_a_worker_that_cannot_write_says_which_it_is(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def full(batch: object, stop: object) -> list[Outcome]:
        return [Outcome("a", "a.wav: No space left on device", fatal=True)]

    plan = plan_pack(read_pack_text(PACK, "p.toml", folder))
    (batch,) = batches_of(plan, Path(), groups_of(plan.hits), 1, {})
    monkeypatch.setattr(sending, "render_batch", full)
    monkeypatch.setattr("socket.gethostname", lambda: "far")
    (sent,) = send_batch(batch, lambda: False)
    assert sent.outcome == Outcome("a", "worker on far: a.wav: No space left on device", fatal=True)


def test_all_files_of_a_hit_are_received_or_none(folder: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    sent = Sent(Outcome("a"), {"a.wav": b"sound", "a.json": b"facts"})
    theirs = folder / "a.json"
    theirs.write_text('{"mine": 1}')
    outcome = receive(sent, folder)
    assert (outcome.fatal, outcome.failure) == (
        True, f"{theirs}: exists and was not written by kickrender; move it, or choose another name"
    )  # fmt: skip
    assert not (folder / "a.wav").exists()
    theirs.unlink()
    whole = sending.write_whole

    def full(path: Path, content: bytes) -> None:
        if path.suffix == ".json":
            raise WriteError(f"{path}: No space left on device")
        whole(path, content)

    monkeypatch.setattr(sending, "write_whole", full)
    assert receive(sent, folder) == Outcome("a", f"{theirs}: No space left on device", fatal=True)
    assert not (folder / "a.wav").exists()
    monkeypatch.undo()
    assert receive(sent, folder) == sent.outcome
    assert ((folder / "a.wav").read_bytes(), theirs.read_bytes()) == (b"sound", b"facts")
    assert receive(replace(sent, files={"a.wav/b.wav": b""}), folder).failure == (
        f"{folder}/a.wav: cannot be made: File exists"
    )
