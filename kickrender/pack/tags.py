"""What a pack's files say of themselves: makers, genre, date, root note, velocity range and loudness, as chunks."""

from __future__ import annotations

import datetime
import os
from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from kickrender.circuit.values import shown
from kickrender.pack.reading import Reading
from kickrender.pack.records import Hit, Tags
from kickrender.sound.chunks import bext_chunk, inst_chunk, midi_note, smpl_chunk
from kickrender.sound.wav import Chunk

if TYPE_CHECKING:
    from kickrender.sound.render import Sound  # loads the compiler, which reading a pack does not need

KEYS = ("artist", "genre", "comment", "copyright", "date")
SOFTWARE = "kickrender"
EPOCH_VARIABLE = "SOURCE_DATE_EPOCH"  # seconds since 1970, as reproducible builds set it
_HISTORY_WORDS = {"pcm16": "A=PCM,F={rate},W=16,M={mode}", "pcm24": "A=PCM,F={rate},W=24,M={mode}"}


def read_tags(reading: Reading) -> Tags:
    """The [tags] table; the date, where it is not given, from SOURCE_DATE_EPOCH, never from the clock."""
    given = reading.table(reading.raw, (), "tags")
    reading.unknown(given, KEYS, "tags")
    texts: dict[str, Any] = {}
    for key in KEYS:
        value = given.get(key, "")
        if key == "date" and isinstance(value, datetime.date):
            value = value.isoformat()
        if not isinstance(value, str):
            reading.fault(("tags", key), shown(value), "a text in quotes")
        else:
            texts[key] = value
    if date := texts.get("date"):
        try:
            datetime.date.fromisoformat(date)
        except ValueError:
            reading.fault(("tags", "date"), shown(date), "a date such as 2026-03-01")
    elif (seconds := os.environ.get(EPOCH_VARIABLE, "")).isdecimal():
        texts["date"] = datetime.datetime.fromtimestamp(int(seconds), datetime.UTC).date().isoformat()
    return Tags(**texts)


def texts_of(tags: Tags, title: str, hit: Hit) -> dict[str, str]:
    """What a hit's file says in words, in any format."""
    licensed = f"licence: {tags.license}" if tags.license else ""  # LIST/INFO has a place for the copyright only
    return {
        "title": hit.name.rpartition("/")[2],
        "artist": tags.artist or "; ".join(tags.credits),
        "album": title,
        "genre": tags.genre,
        "comment": tags.comment,
        "copyright": "; ".join(text for text in (tags.copyright, licensed) if text),
        "license": tags.license,
        "date": tags.date,
        "software": SOFTWARE,
    }


def chunks_of(tags: Tags, title: str, hit: Hit, sound: Sound) -> list[Chunk]:
    """What only a WAV has room for: bext for every hit, smpl and inst where it has a pitch; no time, no path."""
    measured: Mapping[str, Any] = sound.facts["measurements"]
    chunks: list[Chunk] = []
    options = sound.facts["sound"]
    history = _HISTORY_WORDS.get(options["format"], "")
    mode = "mono" if sound.pcm.ndim == 1 else f"{sound.pcm.shape[1]} channels"
    chunks.append(
        bext_chunk(
            description=f"{title}: {hit.name}",
            originator=SOFTWARE,
            reference=hit.recipe_digest[:32],
            date=tags.date,
            coding_history=history.format(rate=sound.rate, mode=mode) + "\r\n" if history else "",
            integrated_lufs=measured["integrated_lufs"],
            true_peak_dbtp=measured["true_peak_dbtp"],
            momentary_lufs=measured["momentary_lufs"],
        )
    )
    if measured["settled_hz"] is not None:
        note = midi_note(measured["settled_hz"], options["concert_pitch_hz"])
        low, high = hit.velocity or (1, 127)
        chunks += [smpl_chunk(note, sound.rate), inst_chunk(note, velocities=(max(low, 1), high))]
    return chunks
