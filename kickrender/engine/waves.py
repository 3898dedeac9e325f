"""Input waves as pieces between break points, so that a step ends on every corner."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit.records import Constant, Points, Pulse, Sine, Wave


@dataclass(frozen=True, eq=False)
class Segments:
    """All inputs of a circuit over (0, length): linear within each segment, plus a sine where there is one.

    end : (segments,) increasing, the last is the length. [s]
    volts, slope : (segments, inputs) at the segment's start. [V], [V/s]
    sines : (inputs, 3): amplitude [V], frequency [Hz], phase [turns].
    """

    end: NDArray[np.float64]
    volts: NDArray[np.float64]
    slope: NDArray[np.float64]
    sines: NDArray[np.float64]


def corners(wave: Wave) -> tuple[list[float], list[float]]:
    """Times and voltages of the piecewise linear part; constant before the first and after the last."""
    match wave:
        case Pulse():
            offsets = [0.0, wave.rise, wave.length, wave.length + wave.fall]
            volts = [wave.rest, wave.strike, wave.strike, wave.rest]
            if wave.length == wave.rise:
                del offsets[1], volts[1]
            return [start + offset for start in wave.starts for offset in offsets], volts * len(wave.starts)
        case Constant():
            return [0.0], [wave.level]
        case Sine():
            return [0.0], [wave.offset]
        case Points():
            return list(wave.times), list(wave.volts)
    raise AssertionError(wave)


def segments_of(waves: list[Wave], length_s: float) -> Segments:
    """Break the waves at every corner of any of them before `length_s`."""
    lines = [(_apart(times), levels) for times, levels in map(corners, waves)]
    breaks = sorted({time for times, _ in lines for time in times if 0.0 < time < length_s})
    end = np.array([*breaks, length_s])
    start = np.array([0.0, *breaks])
    volts = np.empty((end.size, len(waves)))
    slope = np.zeros((end.size, len(waves)))
    for m, (times, levels) in enumerate(lines):
        for s, begin in enumerate(start):
            volts[s, m] = levels[0]
            for index, time in enumerate(times):
                if time > begin:
                    break
                volts[s, m] = levels[index]
                if index + 1 < len(times):
                    per_second = (levels[index + 1] - levels[index]) / (times[index + 1] - time)
                    slope[s, m] = per_second
                    volts[s, m] += per_second * (begin - time)
                else:
                    slope[s, m] = 0.0
    sines = np.zeros((len(waves), 3))
    for m, wave in enumerate(waves):
        if isinstance(wave, Sine):
            sines[m] = wave.amplitude, wave.frequency, wave.phase_deg / 360.0
    return Segments(end, volts, slope, sines)


def _apart(times: list[float]) -> list[float]:
    """The same times, those too close to be told apart moved one float on: a slope between them stays finite."""
    for index in range(1, len(times)):
        times[index] = max(times[index], math.nextafter(times[index - 1], math.inf))
    return times


def voltage_at(wave: Wave, time_s: float) -> float:
    """A wave's voltage at a time; for display, as its sine comes from the C library. [V]"""
    times, volts = corners(wave)
    value = float(np.interp(time_s, times, volts))
    if isinstance(wave, Sine):
        value += wave.amplitude * math.sin(2.0 * math.pi * (wave.frequency * time_s + wave.phase_deg / 360.0))
    return value
