"""A circuit ready to be struck from Python: `kickrender.load("bridged-t").render(decay=0.7)`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from kickrender.circuit import GROUND, Circuit, ResolvedCircuit, read_circuit
from kickrender.errors import Fault, InputError, KickrenderError, nearest_name
from kickrender.sound.level import Gain, Level, level_gain, read_level_text
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Sound, finish, hear_each


@dataclass(frozen=True)
class LoadedCircuit:
    """A circuit that renders itself.

    circuit : the checked circuit, with its controls, parts and nets.
    """

    circuit: Circuit

    def render(
        self,
        settings: Mapping[str, float | str | bool] | None = None,
        *,
        options: SoundOptions | None = None,
        level: Level | str | None = None,
        probes: Sequence[str] = (),
        nets: Sequence[str] = (),
        **controls: float | str | bool,
    ) -> Sound:
        """Strike the circuit once.

        Parameters
        ----------
        settings : mapping, optional
            Controls, parts, inputs or "temperature", for names that are no Python words: {"drop-depth": 0.5}.
        options : SoundOptions, optional
            Rate, format, length, oversampling, raw.
        level : Level or str, optional
            "-14 LUFS", "-1 dBTP"; None keeps volts over full scale.
        probes : sequence of str
            Nets to keep as further channels.
        nets : sequence of str
            Nets to keep in volts, as `sound.nets`, for `sound.write_nets(path)`.
        **controls
            Settings by name, after `settings`.

        Returns
        -------
        sound : Sound
            With samples (float64, shape (n,)), rate, facts, and write(path).

        Raises
        ------
        InputError
            If a setting, level, probe or net is wrong, or the sound goes beyond full scale in a format that would clip
            it.
        SolveError, MeasurementError
            If the circuit cannot be solved, or the sound has no such level (silence).
        """
        options = options or SoundOptions()
        level = read_level_text(level, "level") if isinstance(level, str) else level
        resolved = self.circuit.resolve({**(settings or {}), **controls})
        check_probes(resolved, probes, "probes")
        check_probes(resolved, nets, "nets")
        (take,) = hear_each([(self.circuit, {**(settings or {}), **controls})], options, probes, nets=nets)
        if isinstance(take, KickrenderError):
            raise take
        gain = Gain(0.0) if level is None or options.raw else level_gain([take.measurements], level)
        return finish(take, gain, level)


def load(name_or_path: str | Path) -> LoadedCircuit:
    """The circuit of a shipped name, or of a path (a `Path`, or a text ending in .toml).

    Raises
    ------
    InputError
        No such circuit or file, or every fault of the file at once.
    """
    return LoadedCircuit(read_circuit(name_or_path))


def check_probes(circuit: ResolvedCircuit, probes: Sequence[str], place: str) -> None:
    """Refuse nets that are not solved for; raises InputError with every fault."""
    given = {GROUND, *circuit.nets, *circuit.inputs}
    solved = sorted({net for part in circuit.parts.values() for net in part.terminals.values()} - given)
    faults = [
        Fault(
            place,
            f"net '{net}' is held or driven from outside" if net in given else f"no net '{net}'",
            ", ".join(solved),
            nearest_name(net, solved),
        )
        for net in probes
        if net not in solved
    ]
    if faults:
        raise InputError(faults)
