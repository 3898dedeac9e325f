"""The lock file's text: one fact a line, stable order, plain words; written and read here.

    kickrender lock 1                            the format's version
    pack night-ferry title="Night ferry"
    made kickrender=0.1.0 engine=1 code=...
    ...
    circuit bridged-t digest=...                 every circuit: what it is made of, a line each
      part R1 kind=resistor a=mid b=ground value=47000
    hit soft/F1                                  every hit: a block of six lines
      circuit bridged-t
      settings decay=0.5 pitch=0.4
      recipe ...                                 recipe digest
      pcm ... samples=71886                      SHA-256 of the samples as they lie in the file
      gain -3.125
      measured peak_dbfs=-8.023 ...
    end hits=54 sha256=...                       of every byte before this line

A word with white space, quotes or `=` in it, or an empty one, is written as a JSON string. Lines end with one line
feed; a carriage return before it, which version control may add, is taken away before reading.
"""

from __future__ import annotations

import hashlib
import json
import math
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from pathlib import Path

from kickrender.errors import Fault, InputError, nearest_name
from kickrender.lock.records import Fields, Lock, LockedCircuit, LockedHit

FORMAT = 1
START = "kickrender lock "
HEADERS = ("pack", "made", "libraries", "sound", "level", "audio")
ENTRIES = ("temperature", "net", "input", "model", "part", "control", "output")
HIT_LINES = ("circuit", "settings", "recipe", "pcm", "gain", "measured")
AGAIN = "the file as `kickrender lock` wrote it; lock again once you know why it differs"
_PLAIN = re.compile(r'[^\s"=]+')
_QUOTED = re.compile(r'"(?:[^"\\]|\\.)*"')
_SHA256 = re.compile(r"[0-9a-f]{64}")


def number_text(value: float | bool | str | None) -> str:
    """A value as a lock file shows it: the shortest text that reads back as the same number."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, float):
        return repr(value).removesuffix(".0")
    return "none" if value is None else str(value)


def lock_bytes(lock: Lock) -> bytes:
    """The whole lock file, UTF-8."""
    lines = [
        f"{START}{FORMAT}",
        _line("pack", [lock.pack], {"title": lock.title}),
        _line("made", [], lock.made),
        _line("libraries", [], lock.libraries),
        _line("sound", [], lock.sound),
    ]
    if lock.level:
        lines.append(_line("level", [], lock.level))
    if lock.audio:
        lines.append(_line("audio", [lock.audio]))
    for name, circuit in lock.circuits.items():
        lines += ["", _line("circuit", [name], {"digest": circuit.digest})]
        lines += [
            "  " + _line(what, [entry] if entry else [], fields) for (what, entry), fields in circuit.entries.items()
        ]
    for hit in lock.hits.values():
        measured = {name: number_text(value) for name, value in hit.measured.items()}
        lines += [
            "",
            _line("hit", [hit.name]),
            "  " + _line("circuit", [hit.circuit]),
            "  " + _line("settings", [], hit.settings),
            "  " + _line("recipe", [hit.recipe]),
            "  " + _line("pcm", [hit.pcm], {"samples": str(hit.samples)}),
            "  " + _line("gain", [number_text(hit.gain_db)]),
            "  " + _line("measured", [], measured),
        ]
    body = "".join(f"{line}\n" for line in [*lines, ""]).encode()
    end = _line("end", [], {"hits": str(len(lock.hits)), "sha256": hashlib.sha256(body).hexdigest()})
    return body + f"{end}\n".encode()


def _line(keyword: str, words: list[str], fields: Fields | None = None) -> str:
    pairs = [f"{_word(name)}={_word(value)}" for name, value in (fields or {}).items()]
    return " ".join([keyword, *map(_word, words), *pairs])


def _word(text: str) -> str:
    return text if _PLAIN.fullmatch(text) else json.dumps(text, ensure_ascii=False)


def is_lock_file(path: Path) -> bool:
    """Whether the file begins as lock files of any version do."""
    try:
        with path.open("rb") as file:
            return file.read(len(START)) == START.encode()
    except OSError:
        return False


def read_lock(path: Path) -> Lock:
    """The lock in a file.

    Raises
    ------
    InputError
        No such file, another version's, or every fault of the text at once, each with its line.
    """
    path = Path(path)
    try:
        text = path.read_bytes().decode("utf-8")
    except OSError as error:
        raise InputError(Fault(str(path), f"cannot be read: {error.strerror}", "a file made by `lock`")) from None
    except UnicodeDecodeError as error:
        line = error.object.count(b"\n", 0, error.start) + 1
        raise InputError(Fault(f"{path}:{line}", "is not UTF-8 text", AGAIN)) from None
    return read_lock_text(text, path)


def read_lock_text(text: str, path: Path) -> Lock:
    """The lock of a text, as if it stood in the file at `path`; see `read_lock`."""
    return _Reader(text, path).lock()


@dataclass(frozen=True)
class _Read:
    """One line: its number, whether it is indented, its keyword, plain words, and name=value fields."""

    number: int
    inside: bool
    keyword: str
    words: list[str]
    fields: dict[str, str]


@dataclass
class _Hit:
    """A hit's block while it is being read."""

    name: str
    line: int
    lines: dict[str, _Read] = field(default_factory=dict)


class _Reader:
    """One text being read; collects faults instead of stopping at the first."""

    def __init__(self, text: str, path: Path) -> None:
        self.lines = text.replace("\r\n", "\n").split("\n")
        self.path = path
        self.faults: list[Fault] = []
        self.headers: dict[str, _Read] = {}
        self.circuits: dict[str, LockedCircuit] = {}
        self.entries: dict[tuple[str, str], Fields] = {}
        self.hits: dict[str, _Hit] = {}

    def lock(self) -> Lock:
        self.check_version()
        body, end = self.body()
        block: Callable[[_Read], None] | None = None
        for number, text in enumerate(body[1:], start=2):
            if text.strip() and (line := self.split(number, text)):
                block = self.take(line, block)
        for name in ("pack", "made", "libraries", "sound"):
            if name not in self.headers and not self.faults:
                self.fault(1, f"no line '{name}'", AGAIN)
        hits = {name: hit for name, draft in self.hits.items() if (hit := self.hit(draft))}
        digest = hashlib.sha256("".join(f"{line}\n" for line in body).encode()).hexdigest()
        if end.fields.get("sha256") != digest:
            self.fault(end.number, "the lines above are not those that were locked (their digest differs)", AGAIN)
        if self.faults:
            raise InputError(self.faults)
        headers = {name: line.fields for name, line in self.headers.items()}
        audio = self.headers.get("audio")
        return Lock(
            pack=self.headers["pack"].words[0],
            title=headers["pack"].get("title", ""),
            made=headers["made"],
            libraries=headers["libraries"],
            sound=headers["sound"],
            level=headers.get("level", {}),
            audio=audio.words[0] if audio else "",
            circuits=self.circuits,
            hits=hits,
            path=self.path,
        )

    def check_version(self) -> None:
        first = self.lines[0]
        if not first.startswith(START):
            self.fault(1, f"begins '{first[:40]}'", f"a lock file, which begins '{START}{FORMAT}'")
        elif first != f"{START}{FORMAT}":
            version = first.removeprefix(START)
            self.fault(1, f"a lock file of version {version}", f"version {FORMAT}; lock again with this kickrender")
        if self.faults:
            raise InputError(self.faults)

    def body(self) -> tuple[list[str], _Read]:
        """The lines before the last, and the last, which holds their digest."""
        lines = self.lines[:-1] if self.lines[-1] == "" else self.lines
        last = self.split(len(lines), lines[-1])
        if last is None or last.keyword != "end":
            self.fault(len(lines), "the file ends before its line 'end': it is cut short", AGAIN)
            raise InputError(self.faults)
        return lines[:-1], last

    def take(self, line: _Read, block: Callable[[_Read], None] | None) -> Callable[[_Read], None] | None:
        """Take one line in; returns who takes the indented lines that follow."""
        if line.inside:
            if block is None:
                self.fault(line.number, f"an indented line '{line.keyword}' below no circuit or hit", AGAIN)
            else:
                block(line)
            return block
        if line.keyword in HEADERS:
            if line.keyword in self.headers:
                self.fault(line.number, f"a second line '{line.keyword}'", AGAIN)
            if line.keyword in ("pack", "audio") and len(line.words) != 1:
                self.fault(line.number, f"'{line.keyword}' with {len(line.words)} words", "one word")
            self.headers[line.keyword] = line
            return None
        if line.keyword in ("circuit", "hit") and len(line.words) == 1:
            return self.circuit(line) if line.keyword == "circuit" else self.open_hit(line)
        known = (*HEADERS, "circuit", "hit")
        self.fault(line.number, f"unknown line '{line.keyword}'", ", ".join(known), nearest_name(line.keyword, known))
        return None

    def circuit(self, line: _Read) -> Callable[[_Read], None]:
        entries: dict[tuple[str, str], Fields] = {}
        self.circuits[line.words[0]] = LockedCircuit(self.sha256(line, line.fields.get("digest", "")), entries)

        def entry(inner: _Read) -> None:
            if inner.keyword not in ENTRIES or len(inner.words) > 1:
                nearest = nearest_name(inner.keyword, ENTRIES)
                self.fault(inner.number, f"unknown line '{inner.keyword}'", ", ".join(ENTRIES), nearest)
            else:
                entries[inner.keyword, inner.words[0] if inner.words else ""] = inner.fields

        return entry

    def open_hit(self, line: _Read) -> Callable[[_Read], None]:
        if line.words[0] in self.hits:
            self.fault(line.number, f"a second hit '{line.words[0]}'", "each hit once")
        hit = self.hits[line.words[0]] = _Hit(line.words[0], line.number)

        def inner(fact: _Read) -> None:
            if fact.keyword not in HIT_LINES or fact.keyword in hit.lines:
                nearest = nearest_name(fact.keyword, HIT_LINES)
                self.fault(fact.number, f"unexpected line '{fact.keyword}'", ", ".join(HIT_LINES), nearest)
            hit.lines[fact.keyword] = fact

        return inner

    def hit(self, draft: _Hit) -> LockedHit | None:
        missing = [name for name in HIT_LINES if name not in draft.lines]
        if missing:
            self.fault(draft.line, f"hit '{draft.name}' has no line '{missing[0]}'", AGAIN)
            return None
        one = {name: draft.lines[name].words[:1] for name in ("circuit", "recipe", "pcm", "gain")}
        circuit = "".join(one["circuit"])
        if circuit not in self.circuits:
            line, nearest = draft.lines["circuit"].number, nearest_name(circuit, self.circuits)
            self.fault(line, f"no circuit '{circuit}' in this file", ", ".join(self.circuits), nearest)
        pcm = draft.lines["pcm"]
        measured = draft.lines["measured"]
        return LockedHit(
            name=draft.name,
            circuit=circuit,
            settings=draft.lines["settings"].fields,
            recipe=self.sha256(draft.lines["recipe"], "".join(one["recipe"])),
            pcm=self.sha256(pcm, "".join(one["pcm"])),
            samples=int(self.number(pcm, pcm.fields.get("samples", ""))),
            gain_db=self.number(draft.lines["gain"], "".join(one["gain"])),
            measured={name: self.number(measured, value) for name, value in measured.fields.items()},
            line=draft.line,
        )

    def split(self, number: int, text: str) -> _Read | None:
        """A line taken apart; None, and a fault, when it cannot be."""
        words: list[str] = []
        fields: dict[str, str] = {}
        place = len(text) - len(text.lstrip(" "))
        while place < len(text):
            try:
                word, place = _next_word(text, place)
                if text[place : place + 1] == "=":
                    value, place = _next_word(text, place + 1)
                    fields[word] = value
                else:
                    words.append(word)
            except ValueError:
                self.fault(number, f"cannot be read from column {place + 1} on", AGAIN)
                return None
            if text[place : place + 1] not in ("", " "):
                self.fault(number, f"cannot be read from column {place + 1} on", AGAIN)
                return None
            place += 1
        if not words:
            self.fault(number, "a line without a keyword", AGAIN)
            return None
        return _Read(number, text.startswith(" "), words[0], words[1:], fields)

    def sha256(self, line: _Read, text: str) -> str:
        if not _SHA256.fullmatch(text):
            self.fault(line.number, f"'{text}' is no SHA-256", "64 hexadecimal digits")
        return text

    def number(self, line: _Read, text: str) -> float:
        try:
            value = float(text)
        except ValueError:
            value = math.nan
        if not math.isfinite(value):
            self.fault(line.number, f"'{text}' is no number", "a finite number")
            return 0.0
        return value

    def fault(self, number: int, found: str, allowed: str, nearest: str | None = None) -> None:
        self.faults.append(Fault(f"{self.path}:{number}", found, allowed, nearest))


def _next_word(text: str, place: int) -> tuple[str, int]:
    """The word that begins at `place` and where it ends; ValueError when there is none."""
    if match := _QUOTED.match(text, place):
        return str(json.loads(match.group())), match.end()
    if match := _PLAIN.match(text, place):
        return match.group(), match.end()
    raise ValueError


def fields_of(record: Mapping[str, object]) -> dict[str, str]:
    """A record's values as fields."""
    return {name: number_text(value) for name, value in record.items()}  # type: ignore[arg-type]
