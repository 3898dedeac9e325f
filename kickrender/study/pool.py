"""Results of blind listening pages, taken together."""

from __future__ import annotations

import json
from collections.abc import Sequence
from dataclasses import dataclass
from pathlib import Path

from kickrender.errors import Fault, InputError

SCHEMA = "kickrender blind result"
SCHEMA_VERSION = 1


@dataclass(frozen=True)
class Pooled:
    """Results of one pair of sounds, taken together.

    labels, digests : of the two sounds.
    sittings : number of files. trials, correct : over all of them.
    p_value : probability of so many right answers or more by guessing; exact, one-sided.
    each : (file, listener, correct, trials) of every sitting.
    """

    labels: tuple[str, str]
    digests: tuple[str, str]
    sittings: int
    trials: int
    correct: int
    p_value: float
    each: tuple[tuple[str, str, int, int], ...]


def pool_results(paths: Sequence[str | Path]) -> Pooled:
    """Right answers of several sittings with the same two sounds, counted anew from their trials.

    Raises
    ------
    InputError
        For files that are no whole result, results of different sounds, or a sitting given twice.

    Source: the binomial test, by scipy.stats.binomtest.
    """
    from scipy.stats import binomtest  # here, for who only writes a page

    if not paths:
        raise InputError(Fault("results", "found none", "one or more result files of a blind listening page"))
    faults: list[Fault] = []
    results = [(str(path), found) for path in paths if (found := _read_result(Path(path), faults)) is not None]
    if results:
        first_path, first = results[0]
        seen: dict[str, str] = {}
        for path, result in results:
            if set(result.digests) != set(first.digests):
                faults.append(Fault(path, "a result of other sounds", f"results of the two sounds of {first_path}"))
            if result.sitting in seen:
                faults.append(Fault(path, f"the same sitting as {seen[result.sitting]}", "each sitting once"))
            seen[result.sitting] = path
    if faults:
        raise InputError(faults)
    trials = sum(len(result.answers) for _, result in results)
    correct = sum(result.correct for _, result in results)
    return Pooled(
        labels=first.labels,
        digests=first.digests,
        sittings=len(results),
        trials=trials,
        correct=correct,
        p_value=float(binomtest(correct, trials, 0.5, alternative="greater").pvalue),
        each=tuple((path, result.listener, result.correct, len(result.answers)) for path, result in results),
    )


@dataclass(frozen=True)
class _Result:
    """One sitting: answers are pairs (what X was, what was said), each "A" or "B"."""

    sitting: str
    listener: str
    labels: tuple[str, str]
    digests: tuple[str, str]
    answers: tuple[tuple[str, str], ...]

    @property
    def correct(self) -> int:
        return sum(x == said for x, said in self.answers)


def _read_result(path: Path, faults: list[Fault]) -> _Result | None:
    whole = "a result saved by a blind listening page"
    try:
        raw = json.loads(path.read_bytes())
    except OSError as error:
        faults.append(Fault(str(path), f"cannot be read: {error.strerror}", whole))
        return None
    except ValueError:
        faults.append(Fault(str(path), "not JSON", whole))
        return None
    try:
        if (raw["schema"], raw["schema_version"]) != (SCHEMA, SCHEMA_VERSION):
            raise ValueError
        sounds = [raw["sounds"][k] for k in "AB"]
        answers = tuple((trial["x"], trial["answer"]) for trial in raw["trials"])
        result = _Result(
            sitting=str(raw["sitting"]),
            listener=str(raw["listener"]),
            labels=(str(sounds[0]["label"]), str(sounds[1]["label"])),
            digests=(str(sounds[0]["digest"]), str(sounds[1]["digest"])),
            answers=answers,
        )
        if not answers or any(letter not in ("A", "B") for pair in answers for letter in pair):
            raise ValueError
    except (KeyError, TypeError, ValueError, IndexError):
        faults.append(Fault(str(path), "not a whole result of this version", whole))
        return None
    if raw.get("correct") != result.correct or raw.get("trials_planned") != len(answers):
        found = f"says {raw.get('correct')} right of {raw.get('trials_planned')}; its trials say {result.correct} of "
        faults.append(Fault(str(path), f"{found}{len(answers)}", "a result that was not changed"))
        return None
    return result
