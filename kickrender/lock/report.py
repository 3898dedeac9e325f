"""The page of a verification: what moved, with pictures of before and after, and players."""

from __future__ import annotations

import base64
import io
import shutil
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote

import numpy as np
from numpy.typing import NDArray

from kickrender.errors import Fault, InputError, WriteError
from kickrender.lock.audio import audio_name
from kickrender.lock.records import Lock, LockedHit
from kickrender.lock.summary import MOST_HITS, amount, furthest, hit_facts, limits_text, moved_most, told
from kickrender.lock.verify import SAME, STATUSES, Verdict, Verification
from kickrender.sound.files import write_whole
from kickrender.sound.measure import pitch_track
from kickrender.sound.page.frame import page_bytes

if TYPE_CHECKING:
    from matplotlib.axes import Axes

Floats = NDArray[np.float64]

PAGE, SOUNDS = "index.html", "sounds"
MOST_PICTURES = 60  # a page of more is slow to make and nobody looks at them all
BEFORE_COLOUR, AFTER_COLOUR, LEFT_COLOUR = "#945309", "#0c6664", "#7d8a8c"


def open_report(folder: Path) -> None:
    """Make the report's folder, empty of an earlier report.

    Raises
    ------
    InputError
        If there is a file in the way, or a folder with something else than a report in it.
    WriteError
    """
    if folder.exists():
        names = {path.name for path in folder.iterdir()} if folder.is_dir() else {str(folder)}
        if names - {PAGE, SOUNDS} or names == {SOUNDS}:
            raise InputError(Fault("--report", f"'{folder}' holds something else", "a new folder, or an older report"))
    try:
        folder.mkdir(parents=True, exist_ok=True)
        shutil.rmtree(folder / SOUNDS, ignore_errors=True)
        (folder / PAGE).unlink(missing_ok=True)
    except OSError as error:
        raise WriteError(f"{folder}: {error.strerror or error}") from None


def write_report(verification: Verification, folder: Path) -> None:
    """Write the page, and beside it the sounds it plays: those before, where they were kept, and those after.

    The renders of hits that moved are in the folder's `sounds` already, kept while they were verified.

    Raises
    ------
    WriteError
    """
    moved = [verdict for verdict in verification.verdicts if verdict.status != SAME]
    order = list(STATUSES)
    moved.sort(key=lambda verdict: (-furthest(verdict), order.index(verdict.status)))
    entries = [
        _entry(verification, verdict, folder, pictured=place < MOST_PICTURES) for place, verdict in enumerate(moved)
    ]
    page = page_bytes(
        "kickrender.lock",
        "report",
        {"hits": [hit_facts(verdict) for verdict in moved]},
        media=("'self'", "file:"),
        title=verification.now.title or "Lock file",
        counts=[(status, count, STATUSES[status]) for status, count in verification.counts.items()],
        most=[(move.measure.label, amount(move), verdict.name) for verdict, move in moved_most(verification)],
        causes=_causes(moved),
        limits=limits_text(verification.limits),
        entries=entries,
        pictures=MOST_PICTURES,
        kept=bool(verification.lock.audio),
    )
    write_whole(folder / PAGE, page)


def _causes(moved: list[Verdict]) -> list[tuple[str, int]]:
    counted: dict[str, int] = {}
    for verdict in moved:
        for cause in verdict.causes:
            counted[str(cause)] = counted.get(str(cause), 0) + 1
    return sorted(counted.items(), key=lambda item: -item[1])[:MOST_HITS]


def _entry(verification: Verification, verdict: Verdict, folder: Path, pictured: bool) -> dict[str, Any]:
    """What the page says of one hit, its sounds put in place and its picture drawn."""
    before = _before(verification.lock, verdict, folder)
    after = _sound(folder, verdict.after, verification.now)
    heard = not verdict.same_bytes
    picture = _picture(before, after) if pictured and heard and (before or after) else ""
    return {
        "name": verdict.name,
        "status": verdict.status,
        "told": told(verdict),
        "moves": [
            (m.measure.label, _number(m.before), _number(m.after), amount(m), m.share > 1.0) for m in verdict.moves
        ],
        "causes": [str(cause) for cause in verdict.causes],
        "failure": verdict.failure,
        "before": _address(folder, before) if heard else "",
        "after": _address(folder, after) if heard else "",
        "picture": picture,
    }


def _before(lock: Lock, verdict: Verdict, folder: Path) -> Path | None:
    """The kept render of a hit that moved, copied into the report."""
    hit, kept = verdict.before, lock.audio_folder
    if hit is None or kept is None or verdict.same_bytes:
        return None
    name = audio_name(hit.name, hit.pcm, lock.sound["format"])
    target = folder / SOUNDS / name
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        shutil.copyfile(kept / name, target)
    except OSError as error:
        raise WriteError(f"{target}: {error.strerror or error}") from None
    return target


def _sound(folder: Path, hit: LockedHit | None, lock: Lock) -> Path | None:
    if hit is None:
        return None
    path = folder / SOUNDS / audio_name(hit.name, hit.pcm, lock.sound["format"])
    return path if path.is_file() else None


def _address(folder: Path, path: Path | None) -> str:
    return "" if path is None else quote(path.relative_to(folder).as_posix())


def _number(value: float | None) -> str:
    return "" if value is None else f"{value:.7g}"


def _picture(before: Path | None, after: Path | None) -> str:
    """Waveforms, pitch tracks and what is left between them, each to its own scale, as a data address of a PNG."""
    from matplotlib.figure import Figure

    sounds = [(*_read(path), colour, label) for path, colour, label in _sides(before, after)]
    figure = Figure(figsize=(9.0, 2.6), layout="constrained")
    wave, left, pitch = figure.subplots(1, 3, width_ratios=(3, 2, 2))
    for samples, rate_hz, colour, label in sounds:
        _draw_wave(wave, samples, rate_hz, colour, label)
        times, hz = pitch_track(samples, rate_hz)
        pitch.plot(1000.0 * times, hz, color=colour, linewidth=1.2)
    if len(sounds) == 2:
        (old, rate_hz, *_), (new, *_) = sounds
        count = max(len(old), len(new))
        difference = np.pad(new, (0, count - len(new))) - np.pad(old, (0, count - len(old)))
        _draw_wave(left, difference, rate_hz, LEFT_COLOUR, "difference")
    else:
        left.set_visible(False)
    wave.legend(loc="upper right", fontsize="small", frameon=False)
    for axes, title, label in ((wave, "Sound", ""), (left, "Difference", ""), (pitch, "Pitch", "Hz")):
        axes.set_title(title, loc="left", fontsize="small")
        axes.set(xlabel="ms", ylabel=label)
        axes.tick_params(labelsize="small")
        axes.spines[["top", "right"]].set_visible(False)
    file = io.BytesIO()
    figure.savefig(file, format="png", dpi=110)
    return "data:image/png;base64," + base64.b64encode(file.getvalue()).decode("ascii")


def _sides(before: Path | None, after: Path | None) -> list[tuple[Path, str, str]]:
    sides = ((before, BEFORE_COLOUR, "before"), (after, AFTER_COLOUR, "after"))
    return [(path, colour, label) for path, colour, label in sides if path is not None]


def _read(path: Path) -> tuple[Floats, float]:
    import soundfile

    samples, rate_hz = soundfile.read(path, dtype="float64")
    return samples, float(rate_hz)


def _draw_wave(axes: Axes, samples: Floats, rate_hz: float, colour: str, label: str) -> None:
    axes.plot(1000.0 * np.arange(len(samples)) / rate_hz, samples, color=colour, linewidth=0.9, label=label)
