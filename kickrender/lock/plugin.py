"""A pytest plugin: `pytest --kick-lock PATH` collects one test for each hit of the lock files at PATH.

pytest loads it in every run, so it imports nothing of kickrender's until the option is given. Hits are verified some
dozens at a time, when the first of them is asked for; each test then tells of its own.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import replace
from functools import cached_property
from pathlib import Path
from typing import TYPE_CHECKING, Any

import pytest

if TYPE_CHECKING:
    from kickrender.lock.records import Lock
    from kickrender.lock.verify import Verdict
    from kickrender.pack.records import Hit, Plan

ENDING = ".lock"
START = b"kickrender lock "


def pytest_addoption(parser: pytest.Parser) -> None:
    """Add the options."""
    group = parser.getgroup("kickrender", "renders held still")
    group.addoption(
        "--kick-lock",
        action="append",
        default=[],
        metavar="PATH",
        help="verify the hits of this lock file, or of every lock file in this folder (may be given again)",
    )
    group.addoption("--kick-tolerance", action="store_true", help="let a hit pass that moved within every limit")


def pytest_configure(config: pytest.Config) -> None:
    """Ask for the lock files beside whatever else is asked for."""
    if config.getoption("--kick-lock"):
        config.args.extend(str(file) for file in _files(config) if str(file) not in config.args)


def pytest_collect_file(file_path: Path, parent: pytest.Collector) -> LockFile | None:
    """The lock files that were asked for; any other file is none of ours."""
    if file_path.suffix == ENDING and file_path in _files(parent.config):
        return LockFile.from_parent(parent, path=file_path)
    return None


def _files(config: pytest.Config) -> list[Path]:
    """The lock files behind the option, in a stable order."""
    given = [config.invocation_params.dir / path for path in config.getoption("--kick-lock")]
    files: list[Path] = []
    for path in given:
        if path.is_dir():
            files += sorted(file for file in path.rglob(f"*{ENDING}") if _is_ours(file))
        elif path.is_file():
            files.append(path)
        else:
            raise pytest.UsageError(f"--kick-lock: no file or folder '{path}'")
    if given and not files:
        raise pytest.UsageError(f"--kick-lock: no lock file in {', '.join(map(str, given))}")
    return [file.resolve() for file in files]


def _is_ours(path: Path) -> bool:
    with path.open("rb") as file:
        return file.read(len(START)) == START


class LockFile(pytest.File):
    """A lock file: its hits, and the verification that they share."""

    def collect(self) -> Iterator[LockedHitItem]:
        """One test for each hit of the lock file, and one for each that the pack holds besides."""
        from kickrender.errors import InputError

        try:
            names = dict.fromkeys([*self.locked.hits, *(hit.name for hit in self.plan.hits)])
        except InputError as error:
            raise self.CollectError(str(error)) from None
        for name in names:
            yield LockedHitItem.from_parent(self, name=name)

    @cached_property
    def locked(self) -> Lock:
        """The lock file, read."""
        from kickrender.lock.text import read_lock

        return read_lock(self.path)

    @cached_property
    def plan(self) -> Plan:
        """The plan of the pack that the lock file names."""
        from kickrender.lock.make import plan_of

        return plan_of(self.locked)

    @cached_property
    def portions(self) -> dict[str, Plan]:
        """The part of the plan that each hit is verified with: whole groups, some dozens of hits."""
        from kickrender.pack.batches import MOST_HITS, groups_of

        portions: list[list[Hit]] = [[]]
        for group in groups_of(self.plan.hits):
            if len(portions[-1]) >= MOST_HITS:
                portions.append([])
            portions[-1].extend(group)
        return {hit.name: replace(self.plan, hits=tuple(portion)) for portion in portions for hit in portion}

    def verdict(self, name: str) -> Verdict:
        """A hit's verdict, and with it those of the hits beside it, in this process."""
        from kickrender.lock.verify import REMOVED, Verdict, verify_plan
        from kickrender.sound.warm_up import warm_up

        if name not in self.portions:
            return Verdict(name, REMOVED, before=self.locked.hits[name])
        if name not in self.known:
            warm_up()
            portion = self.portions[name]
            names = {hit.name for hit in portion.hits}
            found = verify_plan(portion, self.locked).verdicts
            self.known |= {verdict.name: verdict for verdict in found if verdict.name in names}
        return self.known[name]

    @cached_property
    def known(self) -> dict[str, Verdict]:
        """Verdicts found so far."""
        return {}


class HitMoved(Exception):
    """A hit is not what was locked; the message says what moved."""


class LockedHitItem(pytest.Item):
    """One hit of a lock file."""

    parent: LockFile

    def runtest(self) -> None:
        """Fail when the hit is not the same, or with --kick-tolerance when it moved beyond a limit."""
        from kickrender.errors import KickrenderError
        from kickrender.lock.summary import full_text
        from kickrender.lock.verify import SAME

        try:
            verdict = self.parent.verdict(self.name)
        except KickrenderError as error:
            raise HitMoved(str(error)) from None
        tolerant = self.config.getoption("--kick-tolerance") and verdict.within
        if verdict.status != SAME and not tolerant:
            raise HitMoved(full_text(verdict))

    def repr_failure(self, excinfo: pytest.ExceptionInfo[BaseException], style: Any = None) -> Any:
        """What moved, without a traceback."""
        if isinstance(excinfo.value, HitMoved):
            return str(excinfo.value)
        return super().repr_failure(excinfo, style)

    def reportinfo(self) -> tuple[Path, int | None, str]:
        """Where the lock file speaks of the hit."""
        hit = self.parent.locked.hits.get(self.name)
        return self.path, hit.line - 1 if hit else None, self.name
