"""Every fault kickrender reports, as one small tree.

KickrenderError            exit code 1
  InputError               exit code 2: the user's data or options are wrong
  SolveError               a circuit could not be solved
  MeasurementError         a sound has no such measurement
  WriteError               a file or folder could not be written
  WorkerError              a worker process was lost
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Sequence
from dataclasses import dataclass


@dataclass(frozen=True)
class Fault:
    """One thing wrong with the user's input.

    place : where: "file.toml:12, parts.R1.value", "--set decay".
    found : what was found there, as a phrase: "unknown kind 'resitor'".
    allowed : what is allowed, as a phrase; empty when there is nothing to add.
    nearest : the nearest known name, or None.
    """

    place: str
    found: str
    allowed: str = ""
    nearest: str | None = None

    def __str__(self) -> str:
        text = f"{self.place}: {self.found}"
        if self.allowed:
            text += f"; allowed: {self.allowed}"
        if self.nearest:
            text += f"; did you mean '{self.nearest}'?"
        return text


class KickrenderError(Exception):
    """A failure with a message meant for people."""

    exit_code = 1


class InputError(KickrenderError):
    """The user's input is wrong; holds every fault found, not only the first."""

    exit_code = 2

    def __init__(self, faults: Fault | Sequence[Fault]) -> None:
        self.faults: tuple[Fault, ...] = (faults,) if isinstance(faults, Fault) else tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))

    def __reduce__(self) -> tuple[object, ...]:
        return (type(self), (self.faults,))


class SolveError(KickrenderError):
    """A circuit that could not be solved: what failed, where, and what to try.

    reason : one of the names in `kickrender.engine.outcome.OUTCOMES`.
    """

    def __init__(
        self,
        reason: str,
        circuit: str,
        advice: str,
        *,
        time_s: float | None = None,
        step_s: float | None = None,
        net: str | None = None,
        residual: float | None = None,
    ) -> None:
        self.reason, self.circuit, self.advice = reason, circuit, advice
        self.time_s, self.step_s, self.net, self.residual = time_s, step_s, net, residual
        where = [f"circuit '{circuit}'"]
        if time_s is not None:
            where.append(f"t = {time_s:.6g} s")
        if step_s is not None:
            where.append(f"step {step_s:.3g} s")
        if net is not None:
            where.append(f"worst net '{net}'")
        if residual is not None:
            where.append(f"residual {residual:.3g}")
        super().__init__(f"{reason} ({', '.join(where)}). {advice}")

    def __reduce__(self) -> tuple[object, ...]:
        return (
            _solve_error,
            (self.reason, self.circuit, self.advice, self.time_s, self.step_s, self.net, self.residual),
        )


def _solve_error(
    reason: str,
    circuit: str,
    advice: str,
    time_s: float | None,
    step_s: float | None,
    net: str | None,
    residual: float | None,
) -> SolveError:
    return SolveError(reason, circuit, advice, time_s=time_s, step_s=step_s, net=net, residual=residual)


class MeasurementError(KickrenderError):
    """A sound has no such measurement (silent, too short, never falls that far)."""


class WriteError(KickrenderError):
    """A file or folder could not be written; nothing half-written is left."""


class WorkerError(KickrenderError):
    """A worker process was lost; the files it wrote are whole."""


def nearest_name(name: str, known: Iterable[str]) -> str | None:
    """The known name most like `name`, or None when none is close."""
    matches = difflib.get_close_matches(str(name), list(known), n=1, cutoff=0.6)
    return matches[0] if matches else None
