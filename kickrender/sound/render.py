"""From a circuit under settings to a finished sound, in two halves.

`hear_each` solves, decimates, cuts and measures; `finish` applies the gain and turns samples into a file's numbers.
Between them whoever renders many hits can set one gain for a group. Cutting and fading come before the measuring, not
after as a person at a desk would do it: both follow the peak, so a gain in between changes no byte, and what is
measured is what the file holds. Who knows the gain beforehand and wants the file's numbers only need not measure:
`hear_each(..., measured=False)`, then `numbers`.
"""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import asdict, dataclass, field, replace
from functools import cached_property
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit import Circuit, ResolvedCircuit
from kickrender.engine import Solution, solve_each
from kickrender.errors import KickrenderError, SolveError, WriteError
from kickrender.sound.decimation import decimate, margin_s
from kickrender.sound.files import write_whole
from kickrender.sound.finish import TAIL_FLOOR, Pcm, fade, quantise, trim
from kickrender.sound.level import Gain, Level
from kickrender.sound.loudness import loudness
from kickrender.sound.measure import DECIBEL_DIGITS, OFFSET_DIGITS, Measurements, measure
from kickrender.sound.options import SoundOptions
from kickrender.sound.recipe import dither_seed, hit_recipe, recipe_digest
from kickrender.sound.sidecar import check_ours, json_bytes, sound_facts
from kickrender.sound.sound_file import check_sound_name, write_sound
from kickrender.sound.wav import Chunk, pcm_sha256

Floats = NDArray[np.float64]
Settings = Mapping[str, float | str | bool]

AFTER_SOUND_S = 0.02  # rendered past the last audible sample, for the cut to find its own place
LARGE_OFFSET = 1e-3  # rest level over peak from which a sound is said to start and end off zero


@dataclass(frozen=True, eq=False)
class Take:
    """A hit that was heard and not yet levelled.

    samples : (n,), volts over full scale, cut and faded unless raw.
    probes : net -> (n,), volts over full scale, cut and faded alike.
    nets : net -> (n,), cut alike, neither scaled nor faded. [V]
    measurements : of `samples`, taken when they are first asked for.
    notes : what a person should know, in words.
    """

    circuit: Circuit
    solution: Solution
    options: SoundOptions
    samples: Floats
    probes: Mapping[str, Floats]
    nets: Mapping[str, Floats]
    notes: tuple[str, ...]

    @cached_property
    def measurements(self) -> Measurements:
        """What was measured of `samples`; raises MeasurementError."""
        return measure(self.samples, self.options.rate_hz, self.options.concert_pitch_hz)


@dataclass(frozen=True, eq=False)
class Sound:
    """A finished sound.

    samples : (n,) as in the file, before rounding and dither. Full scale is 1.
    rate : samples per second. [Hz]
    facts : what the sidecar says.
    probes : net -> (n,), further channels of the file.
    nets : net -> (n,), beside the file: as long as the sound and band-limited as it is, but neither levelled nor
        faded. [V]
    pcm : the file's numbers, (n,) or (n, channels).
    """

    samples: Floats
    rate: int
    facts: Mapping[str, Any]
    probes: Mapping[str, Floats] = field(default_factory=dict)
    nets: Mapping[str, Floats] = field(default_factory=dict)
    pcm: Pcm = field(repr=False, default_factory=lambda: np.empty(0, np.float32))

    def write(self, path: str | Path) -> None:
        """Write the file, and beside it the sidecar, with the ending .json.

        Raises
        ------
        InputError
            If the name does not end as files of the sound's format do.
        WriteError
            If either cannot be written, or the .json is there and somebody else's. Nothing half-written is left.
        """
        check_sound_name(path, self.facts["sound"]["format"], "path")
        write_pair(Path(path), self, self.facts)

    def write_nets(self, path: str | Path) -> None:
        """Write `nets` as CSV: time_s, then a column for each net, in volts; every number to its last digit.

        Raises
        ------
        WriteError
            If it cannot be written. Nothing half-written is left.
        """
        columns = [np.arange(len(self.samples)) / self.rate, *self.nets.values()]
        text = io.StringIO()
        writer = csv.writer(text, lineterminator="\n")
        writer.writerow(["time_s", *(f"{net}_v" for net in self.nets)])
        writer.writerows(zip(*(column.tolist() for column in columns), strict=True))
        write_whole(Path(path), text.getvalue().encode())

    def summary(self) -> str:
        """Length, levels and pitch in one line."""
        m = self.facts["measurements"]
        pieces = [f"{m['length_s']:.3f} s"]
        if m["momentary_lufs"] is not None:
            pieces += [f"{m['momentary_lufs']:.2f} LUFS", f"{m['true_peak_dbtp']:.2f} dBTP"]
        if m["settled_hz"] is not None:
            pieces.append(f"{m['settled_hz']:.2f} Hz ({m['note']} {m['cents']:+.0f} cents)")
        if m["decay_s"] is not None:
            pieces.append(f"decay {m['decay_s']:.3f} s")
        return ", ".join(pieces)


def write_pair(
    path: Path,
    sound: Sound,
    facts: Mapping[str, Any],
    texts: Mapping[str, str] | None = None,
    chunks: Sequence[Chunk] = (),
) -> None:
    """Write a sound's file and then its sidecar beside it: both, or neither. See `write_sound` for the rest.

    Raises
    ------
    WriteError
    """
    sidecar = path.parent / f"{path.name.removesuffix(path.suffix)}.json"
    check_ours(sidecar)
    write_sound(path, sound.pcm, sound.rate, sound.facts["sound"]["format"], texts, chunks)
    try:
        write_whole(sidecar, json_bytes(facts))
    except WriteError:
        path.unlink(missing_ok=True)
        raise


def hear_each(
    hits: Sequence[tuple[Circuit, Settings | ResolvedCircuit]],
    options: SoundOptions,
    probes: Sequence[str] = (),
    measured: bool = True,
    nets: Sequence[str] = (),
) -> Iterator[Take | KickrenderError]:
    """Every hit's take in order, or the reason there is none. All are solved at once, side by side.

    Parameters
    ----------
    hits : sequence of (circuit, settings), or of (circuit, that circuit resolved)
        The latter for what settings do not say: parts that deviate, further strikes.
    options : SoundOptions
    probes : sequence of str
        Nets to keep beside the output.
    measured : bool, default True
        Whether to measure, so that a sound without measurements fails here. Else a take measures when asked.
    nets : sequence of str
        Nets to keep in volts.

    Raises
    ------
    InputError
        If a setting does not suit its circuit.
    """
    resolved = [wanted if isinstance(wanted, ResolvedCircuit) else circuit.resolve(wanted) for circuit, wanted in hits]
    length_s = options.longest_s + margin_s(options.rate_hz, options.oversample)
    solutions = solve_each(resolved, [length_s] * len(hits), probes=[*probes, *nets])
    for (circuit, _), solution in zip(hits, solutions, strict=True):
        if isinstance(solution, SolveError):
            yield solution
            continue
        try:
            take = _heard(circuit, solution, options, probes, nets)
            if measured:
                _ = take.measurements
        except KickrenderError as error:
            yield error
            continue
        yield take


def _heard(
    circuit: Circuit, solution: Solution, options: SoundOptions, probes: Iterable[str], nets: Iterable[str]
) -> Take:
    count, notes = _samples_wanted(solution, options)
    full_scale = solution.circuit.full_scale_v

    def at_rate(net: str) -> Floats:
        def volts(first: int, number: int) -> Floats:
            return solution.sample(options.rate_hz * options.oversample, number, first, net)

        return decimate(volts, count, options.oversample)

    samples = at_rate(solution.circuit.output) / full_scale
    if not options.raw:
        samples = fade(trim(samples, options.rate_hz), options.rate_hz)
    others = {net: at_rate(net)[: len(samples)] / full_scale for net in probes}
    if not options.raw:
        others = {net: fade(values, options.rate_hz) for net, values in others.items()}
    in_volts = {net: at_rate(net)[: len(samples)] for net in nets}
    return Take(circuit, solution, options, samples, others, in_volts, notes)


def _samples_wanted(solution: Solution, options: SoundOptions) -> tuple[int, tuple[str, ...]]:
    """How many samples to take, and notes on it: what was asked for, or as long as the sound lives.

    A circuit at rest costs the solver next to nothing, so every hit is solved to the longest length, and the end is
    looked for in the solution, not guessed before.
    """
    longest = round(options.rate_hz * options.longest_s)
    magnitude = np.abs(solution.sample(options.rate_hz, longest))
    peak = magnitude.max(initial=0.0)
    rest_v = abs(solution.rest[solution.circuit.output])
    notes = []
    if rest_v > LARGE_OFFSET * peak:
        notes.append(f"the output rests at {rest_v:.3g} V, so the sound starts and ends off zero")
    if options.length_s is not None:
        return longest, tuple(notes)
    alive = np.flatnonzero(magnitude >= TAIL_FLOOR * peak)
    count = int(alive[-1]) + 1 + round(AFTER_SOUND_S * options.rate_hz) if peak > 0.0 else 1
    if count >= longest:
        notes.append(
            f"still sounding after {options.longest_s:g} s, where it is faded out; ask for a length to change that"
        )
    return min(count, longest), tuple(notes)


def finish(take: Take, gain: Gain, level: Level | None, seed: int | None = None) -> Sound:
    """The finished sound of a take: gain, the file's numbers, and the facts of both.

    Parameters
    ----------
    gain : Gain
        From `level_gain`, over the take or its group; ignored for raw takes.
    level : Level or None
        What was asked for, for the facts.
    seed : int, optional
        Of the dither; by default from the digest of the hit's own recipe.

    Raises
    ------
    InputError
        If the sound lies beyond full scale in a format that would have to clip it.
    """
    options = take.options
    level = None if options.raw else level
    digest = recipe_digest(hit_recipe(take.circuit, take.solution.circuit, options, level))
    samples, probes, pcm = numbers(take, gain, level, dither_seed(digest) if seed is None else seed)
    measurements = take.measurements
    if level is not None and gain.db != 0.0:
        measurements = _after_gain(measurements, gain, samples, options.rate_hz)
    notes = [*take.notes, *([gain.note] if level is not None and gain.note else [])]
    facts = {
        **sound_facts(take.circuit, take.solution, options),
        "level": None if level is None else asdict(level),
        "gain_db": gain.db if level is not None else 0.0,
        "measurements": asdict(measurements),
        "measurements_before_level": asdict(take.measurements),
        "pcm": {
            "sha256": pcm_sha256(pcm, options.sample_format),
            "samples": len(samples),
            "channels": [take.solution.circuit.output, *probes],
        },
        "notes": notes,
        "recipe_digest": digest,
    }
    return Sound(samples, options.rate_hz, facts, probes, take.nets, pcm)


def numbers(take: Take, gain: Gain, level: Level | None, seed: int) -> tuple[Floats, dict[str, Floats], Pcm]:
    """Samples and probes after the gain, and the file's numbers; see `finish`, which adds the facts."""
    options = take.options
    samples, probes = take.samples, dict(take.probes)
    if level is not None and not options.raw and gain.db != 0.0:
        samples = samples * gain.factor
        probes = {net: values * gain.factor for net, values in probes.items()}
    channels = np.column_stack([samples, *probes.values()]) if probes else samples
    return samples, probes, quantise(channels, options.sample_format, None if options.raw else seed)


def _after_gain(before: Measurements, gain: Gain, samples: Floats, rate_hz: int) -> Measurements:
    """What a gain does to the measurements. Only the gated loudness does not simply move with it: its absolute gate
    stays where it is."""

    def moved(value: float | None) -> float | None:
        return None if value is None else round(value + gain.db, DECIBEL_DIGITS)

    integrated = loudness(samples, rate_hz).integrated_lufs
    return replace(
        before,
        peak_dbfs=moved(before.peak_dbfs),
        true_peak_dbtp=moved(before.true_peak_dbtp),
        momentary_lufs=moved(before.momentary_lufs),
        integrated_lufs=None if integrated is None else round(integrated, DECIBEL_DIGITS),
        offset=round(before.offset * gain.factor, OFFSET_DIGITS) + 0.0,
    )
