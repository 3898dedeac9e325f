"""Designs, layers and takes as planned: which hits there are, and who shares a gain with whom."""

from pathlib import Path

import pytest

from kickrender.circuit import Pulse
from kickrender.pack.design import points
from kickrender.pack.steps import velocities
from tests.pack.plans import faults_of, plan_of
from tests.pack.texts import PACK

DRAWN = (
    PACK.replace(", steps = 3", "").replace("[0.1, 0.5]", '{ from = 0.1, to = 0.9, law = "geometric" }')
    + '[design]\nkind = "latin-hypercube"\ncount = 8\nseed = 3\n'
).replace("{tone}/{accent}", "{point:02d}").replace('together = ["accent"]', "")  # fmt: skip
LAYERED = PACK.replace('accent = { from = "1V", to = "5V", steps = 3 }', "").replace(
    'together = ["accent"]', ""
).replace("{tone}/{accent}", "{tone}/{layer}-{take}") + (
    '[layers]\naccent = ["1V", "3V", "5V"]\n[takes]\ncount = 2\nseed = 1\nspread = { R1 = "5%" }\n'
)  # fmt: skip


def test_a_zip_walks_its_lists_together(folder: Path) -> None:
    text = PACK.replace("[0.1, 0.5]", "[0.1, 0.5, 0.7]") + '[design]\nkind = "zip"\n'
    plan = plan_of(text, folder)
    assert [hit.name for hit in plan.hits] == ["0.1/1V", "0.5/3V", "0.7/5V"]
    assert faults_of(PACK + '[design]\nkind = "zip"\n', folder) == [
        "p.toml:19, design: lists of different lengths: tone 2, accent 3; allowed: one length for all in a zip"
    ]


def test_drawn_points_lie_in_their_ranges(folder: Path) -> None:
    plan = plan_of(DRAWN, folder)
    assert [hit.name for hit in plan.hits] == [f"{k:02d}" for k in range(1, 9)]
    assert [hit.axes["point"] for hit in plan.hits] == list(range(1, 9))
    for hit, (tone, accent) in zip(plan.hits, points("latin-hypercube", 2, 8, 3), strict=True):
        assert hit.axes["tone"] == pytest.approx(0.1 * 9**tone)
        assert hit.axes["accent"] == pytest.approx(1 + 4 * accent)
        assert hit.settings["tone"] == hit.axes["tone"]


def test_lists_beside_drawn_ranges_are_walked_for_every_point(folder: Path) -> None:
    text = DRAWN.replace('accent = { from = "1V", to = "5V" }', 'accent = ["1V", "5V"]')
    plan = plan_of(text.replace("{point:02d}", "{point}-{accent}"), folder)
    assert [hit.name for hit in plan.hits][:3] == ["1-1V", "1-5V", "2-1V"]
    assert len(plan.hits) == 16


def test_a_point_can_share_its_gain_with_the_others(folder: Path) -> None:
    text = DRAWN.replace('ceiling = "-1 dBTP"', 'ceiling = "-1 dBTP"\ntogether = ["point"]')
    assert {hit.group for hit in plan_of(text, folder).hits} == {0}
    assert len({hit.group for hit in plan_of(DRAWN, folder).hits}) == 8


@pytest.mark.parametrize("layers", [1, 2, 3, 5, 128])
def test_velocities_are_shared_out_without_gap(layers: int) -> None:
    found = velocities(layers)
    assert [v for low, high in found for v in range(low, high + 1)] == list(range(128))
    widths = [high - low for low, high in found]
    assert max(widths) - min(widths) <= 1


def test_layers_share_one_gain_and_takes_do_not(folder: Path) -> None:
    hits = plan_of(LAYERED, folder).hits
    assert [hit.name for hit in hits][:6] == [f"0.1/{layer}-{take}" for layer in (1, 2, 3) for take in (1, 2)]
    assert [hit.group for hit in hits] == [0, 1] * 3 + [2, 3] * 3
    assert [hit.velocity for hit in hits][:6:2] == [(0, 41), (42, 84), (85, 127)]
    assert hits[3].axes == {"circuit": "voice", "tone": 0.1, "layer": 2, "accent": 3.0, "take": 2}
    assert plan_of(LAYERED, folder).together == ("layer", "accent")


def test_takes_may_share_a_gain_too(folder: Path) -> None:
    text = LAYERED.replace('ceiling = "-1 dBTP"', 'ceiling = "-1 dBTP"\ntogether = ["take"]')
    assert [hit.group for hit in plan_of(text, folder).hits] == [0] * 6 + [1] * 6


def test_takes_are_of_parts_that_deviate(folder: Path) -> None:
    plan = plan_of(LAYERED, folder)
    circuit = plan.circuits["voice.toml"]
    ohms = [hit.resolved(circuit).parts["R1"].values["resistance"] for hit in plan.hits]
    assert ohms[0] != ohms[1]
    assert ohms == ohms[:2] * 6  # one take is one set of parts
    assert all(abs(ohm / 4700 - 1) < 0.05 for ohm in ohms)
    assert all(hit.resolved(circuit).parts["C1"].values["capacitance"] == 18e-9 for hit in plan.hits)


def test_a_take_does_not_depend_on_what_else_is_in_the_pack(folder: Path) -> None:
    alone = LAYERED.replace("[0.1, 0.5]", "[0.5]").replace('["1V", "3V", "5V"]', '["3V"]')
    more = LAYERED.replace("count = 2", "count = 7").replace('{ R1 = "5%" }', '{ R1 = "5%", capacitor = "20%" }')

    def found(text: str) -> object:
        hits = plan_of(text, folder).hits
        hit = next(h for h in hits if (h.axes["tone"], h.axes["accent"], h.axes["take"]) == (0.5, 3.0, 2))
        return hit.resolved(plan_of(text, folder).circuits["voice.toml"]).parts["R1"]

    assert found(alone) == found(LAYERED) == found(more)
    ours = [hit for hit in plan_of(LAYERED, folder).hits if hit.axes["tone"] == 0.5]
    assert [hit.recipe_digest for hit in plan_of(LAYERED.replace("[0.1, 0.5]", "[0.5]"), folder).hits] == [
        hit.recipe_digest for hit in ours
    ]


def test_further_strikes(folder: Path) -> None:
    struck = plan_of('hits = ["0s", "0.18s"]\n' + PACK, folder)
    pulse = struck.hits[0].resolved(struck.circuits["voice.toml"]).inputs["gate"]
    assert isinstance(pulse, Pulse)
    assert pulse.starts == (0.0, 0.18)
    once = plan_of(PACK, folder)
    assert not {hit.recipe_digest for hit in struck.hits} & {hit.recipe_digest for hit in once.hits}
    assert [hit.recipe_digest for hit in plan_of('hits = ["0s"]\n' + PACK, folder).hits] == [
        hit.recipe_digest for hit in once.hits
    ]


@pytest.mark.parametrize(
    ("hits", "fault"),
    [
        ('["0s", "3ms"]', "p.toml:1, hits: strikes 0.003 s apart, and a pulse of input 'gate' that takes 0.004002 s; "
                          "allowed: strikes at least 0.004002 s apart"),
        ('["0s", "5s"]', "p.toml:1, hits: a strike at 5 s in a sound of at most 4 s; allowed: strikes before its end, "
                         "or a longer length in [sound]"),
    ],
)  # fmt: skip
def test_strikes_that_cannot_be_are_told(hits: str, fault: str, folder: Path) -> None:
    assert faults_of(f"hits = {hits}{PACK}", folder) == [fault]


def test_a_field_that_only_another_block_walks(folder: Path) -> None:
    text = LAYERED + "[[blocks]]\n[[blocks]]\n[blocks.design]\nkind = 'zip'\n"
    assert faults_of(text, folder)  # both blocks make the same names
    drawn = DRAWN + '[[blocks]]\n[[blocks]]\ndesign = { kind = "zip" }\n[blocks.axes]\ntone = [0.1]\naccent = ["1V"]\n'
    assert faults_of(drawn, folder) == [
        "p.toml:18, files.name: field {point}, which circuit 'voice.toml' does not walk"
    ]
