"""What of ours is held still: every shipped circuit at its start and at both ends of every control, and every pack."""

from pathlib import Path

from kickrender.circuit import read_circuit, shipped_circuits, shipped_packs
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack
from kickrender.pack.records import Hit, Plan
from kickrender.sound.options import SoundOptions
from kickrender.sound.recipe import dither_seed, hit_recipe, recipe_digest

FOLDER = Path(__file__).parent / "locks"
CIRCUITS = "circuits"


def circuits_plan() -> Plan:
    """Volts over full scale, in floats, which no setting can overdrive."""
    options = SoundOptions(format="float32")
    circuits = {name: read_circuit(name) for name in shipped_circuits()}
    hits = []
    for name, circuit in circuits.items():
        turned: dict[str, dict[str, float]] = {"start": {}}
        for control in circuit.controls.values():
            turned |= {f"{control.name}-low": {control.name: control.low}}
            turned |= {f"{control.name}-high": {control.name: control.high}}
        for label, settings in turned.items():
            digest = recipe_digest(hit_recipe(circuit, circuit.resolve(settings), options, None))
            hit = f"{name}/{label}"
            hits.append(Hit(hit, name, settings, {"circuit": name}, len(hits), digest, dither_seed(digest)))
    return Plan("Shipped circuits", "", circuits, options, None, (), tuple(hits))


def plan(name: str) -> Plan:
    """The plan of a lock file called `name`."""
    return circuits_plan() if name == CIRCUITS else plan_pack(read_pack(name))


def names() -> list[str]:
    """Every lock file's name: the circuits, then the packs."""
    return [CIRCUITS, *shipped_packs()]
