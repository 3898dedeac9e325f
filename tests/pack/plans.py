"""Pack texts read and planned, or the faults that are told of them."""

from pathlib import Path

import pytest

from kickrender.errors import InputError
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack_text
from kickrender.pack.records import Plan


def plan_of(text: str, folder: Path) -> Plan:
    return plan_pack(read_pack_text(text, "p.toml", folder))


def faults_of(text: str, folder: Path) -> list[str]:
    """What is told of a text that cannot be planned."""
    with pytest.raises(InputError) as caught:
        plan_of(text, folder)
    return [str(fault) for fault in caught.value.faults]


def read_faults_of(text: str, folder: Path) -> list[str]:
    """What is told of a text that cannot be read, before anything is planned."""
    with pytest.raises(InputError) as caught:
        read_pack_text(text, "p.toml", folder)
    return [str(fault) for fault in caught.value.faults]
