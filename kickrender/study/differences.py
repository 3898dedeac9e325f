"""What differs between two sides: the null residual, the measurements, the netlist."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import Any

import numpy as np
from numpy.typing import NDArray

from kickrender.circuit import ResolvedCircuit
from kickrender.circuit.records import ResolvedPart
from kickrender.sound.measure import Measurements

Floats = NDArray[np.float64]

# Nominal mid-band frequencies of octave filters; exact ones are 1000 x 10^(0.3 k). Source: IEC 61260-1 (2014).
OCTAVES_HZ = (31.5, 63.0, 125.0, 250.0, 500.0, 1000.0, 2000.0, 4000.0, 8000.0, 16000.0)
_HALF_OCTAVE = 10.0**0.15

# Measurement -> (how a difference is taken, unit).
_KINDS: Mapping[str, tuple[str, str]] = {
    "start_hz": ("cents", "cents"),
    "settled_hz": ("cents", "cents"),
    "decay_s": ("milliseconds", "ms"),
    "attack_s": ("milliseconds", "ms"),
    "drop_s": ("milliseconds", "ms"),
    "length_s": ("milliseconds", "ms"),
    "peak_dbfs": ("plain", "dB"),
    "true_peak_dbtp": ("plain", "dB"),
    "momentary_lufs": ("plain", "LU"),
    "integrated_lufs": ("plain", "LU"),
    "centroid_hz": ("cents", "cents"),
    "offset": ("plain", "of full scale"),
}


def null_residual(reference: Floats, other: Floats, rate_hz: int) -> dict[str, Any]:
    """The difference of two sounds over the first of them, in dB of their energies: overall and per octave.

    Parameters
    ----------
    reference, other : array of float, shape (n,)
        Matched and aligned. The difference is other - reference.

    Returns
    -------
    residual : dict
        "overall_db", and "octaves_db": mid-band frequency in Hz -> dB, None where the reference has nothing (below
        -120 dB of its whole) in that band; -inf becomes None too: no difference at all.

    The bands are ideal: energies of the spectrum between 10^-0.15 and 10^0.15 times the mid-band frequency.
    """
    difference = other - reference
    whole = float(np.dot(reference, reference))
    power = np.abs(np.fft.rfft(reference)) ** 2
    power_difference = np.abs(np.fft.rfft(difference)) ** 2
    hz = np.fft.rfftfreq(len(reference), 1.0 / rate_hz)
    octaves = {}
    for k, nominal in enumerate(OCTAVES_HZ):
        middle = 1000.0 * 10.0 ** (0.3 * (k - 5))
        band = (hz >= middle / _HALF_OCTAVE) & (hz < middle * _HALF_OCTAVE)
        inside = float(power[band].sum())
        octaves[f"{nominal:g}"] = (
            _decibels(float(power_difference[band].sum()), inside) if inside > 1e-12 * power.sum() else None
        )
    return {"overall_db": _decibels(float(np.dot(difference, difference)), whole), "octaves_db": octaves}


def _decibels(energy: float, reference: float) -> float | None:
    return round(10.0 * math.log10(energy / reference), 2) if energy > 0.0 and reference > 0.0 else None


def measurement_differences(reference: Measurements, other: Measurements) -> dict[str, dict[str, Any]]:
    """Every measurement of both, and the difference in its own unit; None where either has none."""
    table = {}
    for name, (kind, unit) in _KINDS.items():
        a, b = getattr(reference, name), getattr(other, name)
        difference = None
        if a is not None and b is not None:
            if kind == "cents":
                difference = 1200.0 * math.log2(b / a)
            else:
                difference = (b - a) * (1e3 if kind == "milliseconds" else 1.0)
            difference = round(difference, 9 if name == "offset" else 3)
        table[name] = {"reference": a, "other": b, "difference": difference, "unit": unit}
    return table


def netlist_difference(reference: ResolvedCircuit, other: ResolvedCircuit) -> dict[str, Any]:
    """Parts, supplies and inputs that the other circuit has added, removed or changed, with both values.

    A part is changed when its kind, its terminals, its electrical values or its model's data are.
    """
    parts: dict[str, Any] = {"added": {}, "removed": {}, "changed": {}}
    for name in sorted({*reference.parts, *other.parts}):
        a, b = reference.parts.get(name), other.parts.get(name)
        if a is None and b is not None:
            parts["added"][name] = _part(b)
        elif b is None and a is not None:
            parts["removed"][name] = _part(a)
        elif a is not None and b is not None and _part(a) != _part(b):
            before, after = _part(a), _part(b)
            parts["changed"][name] = {
                key: {"from": before.get(key), "to": after.get(key)}
                for key in sorted({*before, *after})
                if before.get(key) != after.get(key)
            }
    sources = {
        kind: {
            name: {"from": _plain(old.get(name)), "to": _plain(new.get(name))}
            for name in sorted({*old, *new})
            if old.get(name) != new.get(name)
        }
        for kind, old, new in (
            ("nets", dict(reference.nets), dict(other.nets)),
            ("inputs", dict(reference.inputs), dict(other.inputs)),
        )
    }
    return {"parts": parts, **sources}


def _part(part: ResolvedPart) -> dict[str, Any]:
    facts: dict[str, Any] = {"kind": part.kind, "terminals": dict(part.terminals), **dict(part.values)}
    if part.model is not None:
        facts["model"] = part.model.name
        facts |= {f"model {key}": value for key, value in part.model.values.items()}
    return facts


def _plain(value: object) -> Any:
    return value if value is None or isinstance(value, float) else str(value)
