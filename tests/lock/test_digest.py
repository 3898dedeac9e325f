"""Recipe and circuit digests, recomputed by hand from what the README says of their bytes, and what moves them."""

import hashlib
from pathlib import Path

import pytest

from kickrender.circuit import read_circuit_text
from kickrender.engine import ENGINE_VERSION
from kickrender.pack.plan import plan_pack
from kickrender.pack.read import read_pack
from kickrender.sound import recipe
from kickrender.sound.level import Level
from kickrender.sound.options import SoundOptions
from kickrender.sound.recipe import hit_recipe, recipe_digest
from tests.lock.conftest import Edit
from tests.lock.texts import BELL


def sha256(text: str) -> str:
    return hashlib.sha256(text.encode("ascii")).hexdigest()


# Written out by hand: sorted keys, no white space, a point or an exponent in every float.
CIRCUIT = (
    '{"controls":{"accent":{"act":"drives","high":5.0,"law":"linear","low":1.0,"start":3.0,"target":"gate"}},'
    '"format":1,"full_scale_v":0.5,'
    '"inputs":{"gate":{"pulse":{"fall":2e-06,"length":0.001,"rest":0.0,"rise":2e-06,"strike":5.0}}},'
    '"nets":{},"output":"out","parts":{'
    '"C1":{"kind":"capacitor","model":null,"taper":"linear","terminals":{"a":"out","b":"ground"},'
    '"values":{"value":1e-06}},'
    '"D1":{"kind":"diode","model":{"band_gap":1.11,"capacitance":0.0,"ideality":1.0,"saturation_current":2.5e-09,'
    '"series_resistance":0.0},"taper":"linear","terminals":{"anode":"gate","cathode":"side"},"values":{}},'
    '"L1":{"kind":"inductor","model":null,"taper":"linear","terminals":{"a":"out","b":"ground"},"values":{"value":2.2}},'
    '"R1":{"kind":"resistor","model":null,"taper":"linear","terminals":{"a":"gate","b":"out"},'
    '"values":{"value":10000.0}},'
    '"R2":{"kind":"resistor","model":null,"taper":"linear","terminals":{"a":"side","b":"ground"},'
    '"values":{"value":100000.0}}},"temperature_k":298.15}'
)
HIT = (
    '{"circuit":"CIRCUIT","engine":"ENGINE","level":{"ceiling_dbtp":null,"measure":"momentary","target":-20.0},'
    '"settings":{"accent":ACCENT,"R1":15000.0},"sound":{"concert_pitch_hz":440.0,"format":"pcm24","length_s":0.6,'
    '"oversample":8,"rate_hz":48000,"raw":false}}'
)


def hit_text(accent: str, ceiling: str = "null", shared: str = "") -> str:
    text = HIT.replace("CIRCUIT", sha256(CIRCUIT)).replace("ENGINE", ENGINE_VERSION).replace("ACCENT", accent)
    # Keys are sorted by code point: capitals before small letters.
    text = text.replace(f'"accent":{accent},"R1":15000.0', f'"R1":15000.0,"accent":{accent}')
    return text.replace('"ceiling_dbtp":null', f'"ceiling_dbtp":{ceiling}').replace('"sound":', f'{shared}"sound":')


def test_the_circuit_digest_by_hand() -> None:
    assert read_circuit_text(BELL).digest == sha256(CIRCUIT)


def test_the_recipe_digest_of_a_hit_by_hand() -> None:
    circuit = read_circuit_text(BELL)
    options, level = SoundOptions(length_s=0.6), Level("momentary", -20.0)
    resolved = circuit.resolve({"R1": "15k", "accent": "2V"})
    assert recipe_digest(hit_recipe(circuit, resolved, options, level)) == sha256(hit_text("2.0"))


def test_the_recipe_digest_of_hits_that_share_a_gain_by_hand(folder: Path) -> None:
    """The digests of the hits' own recipes, sorted, stand in the recipe of each."""
    ceiling = "0.0"  # a pack's level has one, full scale unless it asks for another
    group = sorted(sha256(hit_text(accent, ceiling)) for accent in ("2.0", "5.0"))
    shared = '"shares_gain_with":["{}","{}"],'.format(*group)
    plan = plan_pack(read_pack(folder / "bells.toml"))
    digests = {hit.name: hit.recipe_digest for hit in plan.hits}
    assert digests["bell/15k-2V"] == sha256(hit_text("2.0", ceiling, shared))
    assert digests["bell/15k-5V"] == sha256(hit_text("5.0", ceiling, shared))


def digest_in(folder: Path) -> str:
    return plan_pack(read_pack(folder / "bells.toml")).hits[0].recipe_digest


STAYS = {
    "a circuit's title": ("bell.toml", '"Bell"', '"Else"'),
    "a comment": ("bell.toml", "# a comment", "# another"),
    "a way to write a value": ("bell.toml", '"10k"', "1e4"),
    "a model's name": ("bell.toml", "silicon", "mine"),
    "a model's source": ("bell.toml", '"2.5n"', '"2.5n"\nsource = "a handbook"'),
    "the order of keys": ("bell.toml", 'kind = "resistor", value = "10k"', 'value = "10k", kind = "resistor"'),
    "a pack's title": ("bells.toml", '"Bells"', '"Else"'),
    "the names of files": ("bells.toml", "{circuit}/{R1}", "{R1}/{circuit}"),
    "hits beside it": ("bells.toml", '["10k", "15k"]', '["10k", "22k", "15k"]'),
}
MOVES = {
    "a part": ("bell.toml", '"1u"', '"1.001u"'),
    "a net": ("bell.toml", '"side"', '"other"'),
    "a model": ("bell.toml", '"2.5n"', '"2.6n"'),
    "an input": ("bell.toml", '"1ms"', '"2ms"'),
    "a control": ("bell.toml", 'from = "1V"', 'from = "0V"'),
    "the temperature": ("bell.toml", 'title = "Bell"', 'temperature = "26C"'),
    "a setting": ("bells.toml", "[files]", "[fixed]\nR2 = 5e4\n[files]"),
    "the level": ("bells.toml", "-20 LUFS", "-20.5 LUFS"),
    "the rate": ("bells.toml", "[sound]", "[sound]\nrate = 44100"),
    "who shares the gain": ("bells.toml", '"5V"]', '"4V"]'),
}


@pytest.mark.parametrize("name", STAYS)
def test_what_does_not_move_the_recipe(name: str, folder: Path, edit: Edit) -> None:
    before = digest_in(folder)
    edit(*STAYS[name])
    assert digest_in(folder) == before


@pytest.mark.parametrize("name", MOVES)
def test_what_moves_the_recipe(name: str, folder: Path, edit: Edit) -> None:
    before = digest_in(folder)
    edit(*MOVES[name])
    assert digest_in(folder) != before


def test_the_engines_version_moves_it_and_the_place_of_the_files_does_not(
    folder: Path, tmp_path_factory: pytest.TempPathFactory, monkeypatch: pytest.MonkeyPatch
) -> None:
    before = digest_in(folder)
    elsewhere = tmp_path_factory.mktemp("elsewhere")
    for path in folder.glob("*.toml"):
        (elsewhere / path.name).write_bytes(path.read_bytes())
    assert digest_in(elsewhere) == before
    monkeypatch.setattr(recipe, "ENGINE_VERSION", "next")
    assert digest_in(folder) != before
