"""What the README shows works: its files can be read, its commands exist, its test line is what .ci/run finds."""

import re
from pathlib import Path

from kickrender.circuit import read_circuit_text
from kickrender.cli.main import kickrender
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack, read_pack_text
from kickrender.sound.options import SoundOptions
from kickrender.sound.render import Take, hear_each

ROOT = Path(__file__).resolve().parents[1]
README = (ROOT / "README.md").read_text()
CIRCUIT, PACK, BLOCKS, BY_EAR = re.findall(r"```toml\n(.*?)```", README, re.DOTALL)


def test_the_circuit_file_shown_sounds() -> None:
    circuit = read_circuit_text(CIRCUIT)
    (take,) = hear_each([(circuit, {})], SoundOptions())
    assert isinstance(take, Take)
    # L1 with C1, by 1 / (2 pi sqrt(L C)).
    assert take.measurements.settled_hz is not None
    assert abs(take.measurements.settled_hz - 49.5) < 0.1


def test_the_pack_file_shown_is_the_shipped_one_and_takes_blocks() -> None:
    shown, shipped = (plan_pack(pack) for pack in (read_pack_text(PACK), read_pack("night-ferry")))
    assert [hit.name for hit in shown.hits] == [hit.name for hit in shipped.hits]
    template = PACK.replace("{pitch}_", "{pitch}_{drop-depth}_").replace('name = "{circuit}', 'name = "{number}')
    assert len(plan_pack(read_pack_text(template.replace("_{drop-depth}", "") + BLOCKS)).hits) == 27 * 2 + 27


def test_the_pack_by_ear_plans() -> None:
    hits = plan_pack(read_pack_text(BY_EAR)).hits
    assert [hit.name for hit in hits][:3] == ["F1/1-1", "F1/1-2", "F1/2-1"]
    assert len(hits) == 5 * 3 * 2
    assert all(hit.goals["pitch"]["control"] == "pitch" for hit in hits)


def test_every_command_is_described() -> None:
    for name in kickrender.commands:
        assert f"| `kickrender {name}" in README


def test_every_option_of_render_is_described() -> None:
    options = {
        name for parameter in kickrender.commands["render"].params for name in parameter.opts if name[:2] == "--"
    }
    for name in options - {"--out", "--set", "--json"}:
        assert f"| `{name}" in README


def test_every_option_of_every_study_is_described() -> None:
    section = README.split("### Studies")[1].split("\n## ")[0]
    for name, command in kickrender.commands["study"].commands.items():
        assert f"| `kickrender study {name}" in README
        options = {option for parameter in command.params for option in parameter.opts if option[:2] == "--"}
        for option in options:
            assert re.search(rf"`{option}\b", section), f"study {name} {option}"


def test_the_builds_own_line_is_the_readmes() -> None:
    assert 'grep -m1 -F ".[test]" README.md' in (ROOT / ".ci" / "run").read_text()
    (line,) = [line for line in README.splitlines() if ".[test]" in line]
    assert line.endswith(".venv/bin/pytest")
