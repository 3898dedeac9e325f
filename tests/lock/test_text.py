"""The lock file's text: what is written is read back, and every damage is told with its line."""

import re
from dataclasses import replace
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st

from kickrender.errors import InputError
from kickrender.lock.records import Lock, LockedCircuit, LockedHit
from kickrender.lock.text import lock_bytes, number_text, read_lock, read_lock_text

HIT = LockedHit("a", "bell", {"accent": "2"}, "1" * 64, "2" * 64, 48000, -3.125, {"peak_dbfs": -1.5, "offset": 0.0})
LOCK = Lock(
    pack="bells.toml",
    title="Bells",
    made={"kickrender": "1", "engine": "1", "code": "ab"},
    libraries={"numpy": "2"},
    sound={"format": "pcm24"},
    level={},
    audio="",
    circuits={"bell": LockedCircuit("3" * 64, {("part", "R1"): {"kind": "resistor", "value": "47000"}})},
    hits={"a": HIT, "b": replace(HIT, name="b")},
)
WORDS = st.text(st.characters(exclude_categories=["Cs"]), max_size=12)


@given(st.dictionaries(WORDS, WORDS), WORDS, WORDS)
def test_whatever_is_written_is_read_back(fields: dict[str, str], name: str, title: str) -> None:
    hit = replace(HIT, name=name, circuit=title, settings=fields)
    lock = replace(LOCK, title=title, level=fields, hits={name: hit}, circuits={title: LOCK.circuits["bell"]})
    assert read_lock_text(lock_bytes(lock).decode(), Path("a.lock")) == lock


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_numbers_keep_every_bit(value: float) -> None:
    assert float(number_text(value)) == value


def test_the_text_is_a_line_a_fact(tmp_path: Path) -> None:
    lines = lock_bytes(LOCK).decode().split("\n")
    assert lines[:5] == [
        "kickrender lock 1",
        "pack bells.toml title=Bells",
        "made kickrender=1 engine=1 code=ab",
        "libraries numpy=2",
        "sound format=pcm24",
    ]
    assert lines[6:8] == [f"circuit bell digest={'3' * 64}", "  part R1 kind=resistor value=47000"]
    assert lines[9:16] == [
        "hit a",
        "  circuit bell",
        "  settings accent=2",
        f"  recipe {'1' * 64}",
        f"  pcm {'2' * 64} samples=48000",
        "  gain -3.125",
        "  measured peak_dbfs=-1.5 offset=0",
    ]
    path = tmp_path / "a.lock"
    path.write_bytes(lock_bytes(LOCK).replace(b"\n", b"\r\n"))  # as version control may hand it out
    assert read_lock(path) == LOCK
    assert [hit.line for hit in read_lock(path).hits.values()] == [10, 18]


DAMAGE = {
    "empty": (lambda text: "", r":1: begins ''; allowed: a lock file, which begins 'kickrender lock 1'"),
    "not a lock": (lambda text: "[[package]]\n" + text, r":1: begins '\[\[package\]\]'"),
    "another version": (
        lambda text: text.replace("lock 1", "lock 2", 1),
        r":1: a lock file of version 2; allowed: version 1",
    ),
    "cut short": (lambda text: text[:-300], r":\d+: the file ends before its line 'end': it is cut short"),
    "a digit": (lambda text: text.replace("2222", "2232", 1), r":26: the lines above are not those that were locked"),
    "no digest": (lambda text: text.replace("2" * 64, "2" * 63, 1), r":14: '2{63}' is no SHA-256; allowed: 64 hex"),
    "no number": (lambda text: text.replace("-3.125", "much", 1), r":15: 'much' is no number"),
    "no finite number": (lambda text: text.replace("-3.125", "inf", 1), r":15: 'inf' is no number"),
    "a line gone": (lambda text: text.replace("  gain -3.125\n", "", 1), r":10: hit 'a' has no line 'gain'"),
    "a header gone": (lambda text: text.replace("libraries numpy=2\n", "", 1), r":1: no line 'libraries'"),
    "a hit twice": (lambda text: text.replace("hit b", "hit a"), r":18: a second hit 'a'"),
    "a line twice": (lambda text: text.replace("  gain -3.125\n", "  gain -3.125\n  gain 1\n", 1), r":16: unexpected"),
    "a misspelt line": (lambda text: text.replace("  gain", "  gian", 1), r":15: unexpected line 'gian'.*'gain'\?"),
    "a misspelt block": (lambda text: text.replace("hit b", "hti b"), r":18: unknown line 'hti'.*did you mean 'hit'\?"),
    "a misspelt part": (lambda text: text.replace("  part", "  prat", 1), r":8: unknown line 'prat'.*'part'\?"),
    "no such circuit": (
        lambda text: text.replace("  circuit bell", "  circuit bel", 1),
        r":11: no circuit 'bel' in this file; allowed: bell; did you mean 'bell'",
    ),
    "open quotes": (lambda text: text.replace("title=Bells", 'title="Bells'), r":2: cannot be read from column 22 on"),
    "words run together": (lambda text: text.replace("title=Bells", 'title="Bel"ls'), r":2: cannot be read from"),
    "no keyword": (lambda text: text.replace("  gain -3.125", "  gain=3", 1), r":15: a line without a keyword"),
    "inside of nothing": (lambda text: text.replace("sound", "  sound", 1), r":5: an indented line 'sound' below no"),
}


@pytest.mark.parametrize("name", DAMAGE)
def test_damage_is_told_with_its_line(name: str, tmp_path: Path) -> None:
    damage, message = DAMAGE[name]
    path = tmp_path / "a.lock"
    path.write_text(damage(lock_bytes(LOCK).decode()))
    with pytest.raises(InputError, match=re.escape(str(path)) + message):
        read_lock(path)


def test_bytes_that_are_no_text_are_told_with_their_line(tmp_path: Path) -> None:
    path = tmp_path / "a.lock"
    path.write_bytes(lock_bytes(LOCK).replace(b"Bells", b"B\xe9lls"))
    with pytest.raises(InputError, match=re.escape(f"{path}:2: is not UTF-8 text")):
        read_lock(path)
    with pytest.raises(InputError, match="cannot be read"):
        read_lock(tmp_path / "none.lock")
