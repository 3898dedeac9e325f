"""Making a lock file: every hit rendered, and the file written whole or not at all."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

from kickrender.errors import Fault, InputError, KickrenderError, WriteError
from kickrender.lock.audio import remove_kept
from kickrender.lock.contents import lock_of, path_beside
from kickrender.lock.records import Lock
from kickrender.lock.text import is_lock_file, lock_bytes, read_lock
from kickrender.lock.work import render_hits
from kickrender.pack.batches import groups_of
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack
from kickrender.pack.records import Pack, Plan
from kickrender.pack.workers import Progress
from kickrender.sound.files import sweep_unfinished, write_whole

ENDING = ".lock"
AUDIO_ENDING = ".audio"


class NotLocked(KickrenderError):
    """Some hits could not be rendered, so there is nothing to lock; the message says which and why."""


def lock_path(pack: Pack, name_or_path: str) -> Path:
    """Where the lock file of a pack lies unless one is chosen: beside the pack file, a shipped pack's here."""
    if pack.path is None or not str(name_or_path).endswith(".toml"):
        return Path(f"{name_or_path}{ENDING}")
    return pack.path.with_suffix(ENDING)


def pack_name(pack: Pack, name_or_path: str, path: Path) -> str:
    """What the lock file at `path` calls its pack: a shipped name, or the path from one to the other."""
    if pack.path is None or not str(name_or_path).endswith(".toml"):
        return str(name_or_path)
    return path_beside(path, pack.path)


def write_lock(
    plan: Plan,
    path: Path,
    pack: str = "",
    *,
    audio: bool = False,
    jobs: int = 1,
    progress: Progress = lambda hits: None,
) -> Lock:
    """Render every hit of a plan and write the lock file; an older one stays as it was until all of it is known.

    Parameters
    ----------
    pack : str
        What the lock file calls its pack, from `pack_name`.
    audio : bool
        Whether to keep the renders, in a folder beside the file, called as it is with the ending .audio.

    Raises
    ------
    InputError
        If the file at `path` is somebody else's, damaged, or a lock file of another version.
    NotLocked
        If a hit cannot be rendered.
    WriteError
    """
    old = check_target(path)
    folder = path.with_suffix(AUDIO_ENDING)
    if audio and folder.is_dir():
        sweep_unfinished(folder)
    lock = replace(lock_of(plan, pack), audio=folder.name if audio else "", path=path)
    unlocked = replace(lock, audio="")
    hits, failed = {}, {}
    for found in render_hits(plan, unlocked, groups_of(plan.hits), jobs, progress, folder if audio else None):
        if found.hit is None:
            failed[found.name] = found.failure
        else:
            hits[found.name] = found.hit
    if failed:
        lines = [f"{hit.name}: {failed[hit.name]}" for hit in plan.hits if hit.name in failed]
        raise NotLocked("\n".join([*lines, f"{path} was not written: {len(failed)} of {len(plan.hits)} hits failed"]))
    lock = replace(lock, hits={hit.name: hits[hit.name] for hit in plan.hits})
    write_whole(path, lock_bytes(lock))
    if old is not None:
        remove_kept(old, lock)
    return lock


def check_target(path: Path) -> Lock | None:
    """The lock file that is to be replaced, None where there is none.

    Raises
    ------
    InputError
        If the file there is not ours, or cannot be read: it is for a person to take it away.
    WriteError
        If there is no such folder.
    """
    if not path.parent.is_dir():
        raise WriteError(f"{path.parent}: no such folder")
    if not path.exists():
        return None
    if not is_lock_file(path):
        found = "exists and is no lock file of kickrender's"
        raise InputError(Fault(str(path), found, "another --lock, or move the file away"))
    try:
        return read_lock(path)
    except InputError as error:
        first = Fault(str(path), "is there already and cannot be read, so it is left alone", "remove it to lock afresh")
        raise InputError([first, *error.faults]) from None


def plan_of(lock: Lock) -> Plan:
    """The plan of the pack that a lock file names.

    Raises
    ------
    InputError
        If it names none, or one that cannot be read.
    """
    if not lock.pack:
        found = "was made by a program, and names no pack"
        raise InputError(Fault(f"{lock.path}:2, pack", found, "a lock file made by `kickrender lock`"))
    folder = lock.path.parent if lock.path else Path()
    return plan_pack(read_pack(folder / lock.pack if lock.pack.endswith(".toml") else lock.pack))
