"""What the files of a pack say of themselves, read back by an independent parser."""

import struct
import wave

import pytest
import soundfile

from kickrender.errors import InputError
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.run import render_plan

PACK = """
title = "Quay"
circuit = "bridged-t"
[sound]
length = 0.4
[level]
target = "-20 LUFS"
[tags]
artist = "Harbour"
genre = "Foley"
date = 2026-03-01
[axes]
pitch = [0.4]
[files]
name = "hit-{pitch}"
"""


def chunks_in(path):
    """The RIFF chunks of a file: identifier -> data, by the specification's own layout."""
    content, place, found = path.read_bytes(), 12, {}
    while place < len(content):
        identifier, size = struct.unpack_from("<4sI", content, place)
        found[identifier.decode()] = content[place + 8 : place + 8 + size]
        place += 8 + size + size % 2
    return found


@pytest.fixture(scope="module")
def made(tmp_path_factory):
    folder = tmp_path_factory.mktemp("tags")
    result = render_plan(plan_pack(read_pack_text(PACK)), folder)
    assert not result.failed
    return folder / "hit-0.4.wav"


def test_libsndfile_reads_the_texts(made):
    with soundfile.SoundFile(made) as file:
        assert (file.title, file.artist, file.genre, file.album) == ("hit-0.4", "Harbour", "Foley", "Quay")
        assert file.date == "2026-03-01"


def test_the_standard_library_still_opens_it(made):
    with wave.open(str(made)) as file:
        assert (file.getnchannels(), file.getframerate()) == (1, 48_000)


def test_note_and_loudness_are_the_measured_ones(made):
    """smpl holds the settled pitch as a MIDI note with its fraction; bext holds hundredths of the loudness."""
    import json

    facts = json.loads(made.with_suffix(".json").read_text())["measurements"]
    found = chunks_in(made)
    note, fraction = struct.unpack_from("<II", found["smpl"], 12)
    frequency = 440.0 * 2.0 ** ((note + fraction / 2**32 - 69) / 12)
    assert frequency == pytest.approx(facts["settled_hz"], rel=1e-6)
    momentary = struct.unpack_from("<h", found["bext"], 418)[0]
    assert momentary == pytest.approx(100 * facts["momentary_lufs"], abs=0.51)
    assert found["inst"][5:7] == bytes([1, 127])


def test_the_date_comes_from_the_pack_or_the_variable_never_from_the_clock(monkeypatch):
    without = PACK.replace("date = 2026-03-01\n", "")
    monkeypatch.delenv("SOURCE_DATE_EPOCH", raising=False)
    assert read_pack_text(without).tags.date == ""
    monkeypatch.setenv("SOURCE_DATE_EPOCH", "86400")
    assert read_pack_text(without).tags.date == "1970-01-02"
    assert read_pack_text(PACK).tags.date == "2026-03-01"


@pytest.mark.parametrize(
    ("line", "message"),
    [
        (
            'gender = "x"',
            "unknown key 'gender'; allowed: artist, genre, comment, copyright, date; did you mean",
        ),
        ('date = "tomorrow"', "tags.date: 'tomorrow'; allowed: a date such as 2026-03-01"),
        ("genre = 3", "tags.genre: 3; allowed: a text in quotes"),
    ],
)
def test_bad_tags_are_told(line, message):
    text = PACK.replace('artist = "Harbour"\ngenre = "Foley"\ndate = 2026-03-01', line)
    with pytest.raises(InputError) as caught:
        read_pack_text(text)
    assert message in str(caught.value)
