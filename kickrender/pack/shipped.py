"""What is shipped, with titles."""

from __future__ import annotations

from kickrender.circuit import shipped_circuits, shipped_packs
from kickrender.circuit.source import read_source


def shipped() -> dict[str, dict[str, str]]:
    """{"circuits": {name: title}, "packs": {name: title}} of everything that comes with kickrender."""
    circuits, packs = shipped_circuits(), shipped_packs()
    return {
        "circuits": {name: str(read_source(name, "circuit", circuits).raw.get("title", "")) for name in circuits},
        "packs": {name: str(read_source(name, "pack", packs).raw.get("title", "")) for name in packs},
    }
