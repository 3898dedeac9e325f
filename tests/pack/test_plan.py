"""Plans: which hits a pack holds, in which order, called what, sharing gain with whom."""

from pathlib import Path

import pytest

from tests.pack.plans import faults_of, plan_of
from tests.pack.texts import PACK


def test_hits_stand_in_the_order_of_the_file_the_last_axis_fastest(folder: Path) -> None:
    plan = plan_of(PACK, folder)
    assert [hit.name for hit in plan.hits] == ["0.1/1V", "0.1/3V", "0.1/5V", "0.5/1V", "0.5/3V", "0.5/5V"]
    assert plan.hits[1].axes == {"circuit": "voice", "tone": 0.1, "accent": 3.0}
    assert plan.hits[1].settings == {"R1": "4k7", "tone": 0.1, "accent": 3.0}


def test_a_list_of_circuits_is_the_slowest_axis(folder: Path) -> None:
    text = PACK.replace('"voice.toml"', '["voice.toml", "other.toml"]').replace("{tone}", "{circuit}-{tone}")
    assert [hit.name for hit in plan_of(text, folder).hits][5:7] == ["voice-0.5/5V", "other-0.1/1V"]


def test_groups_are_hits_that_differ_along_the_named_axes_only(folder: Path) -> None:
    assert [hit.group for hit in plan_of(PACK, folder).hits] == [0, 0, 0, 1, 1, 1]
    by_tone = PACK.replace('together = ["accent"]', 'together = ["tone"]')
    assert [hit.group for hit in plan_of(by_tone, folder).hits] == [0, 1, 2, 0, 1, 2]
    alone = PACK.replace('together = ["accent"]', "")
    assert [hit.group for hit in plan_of(alone, folder).hits] == [0, 1, 2, 3, 4, 5]
    circuits = PACK.replace('"voice.toml"', '["voice.toml", "other.toml"]').replace("{tone}", "{circuit}-{tone}")
    both = circuits.replace('together = ["accent"]', 'together = ["circuit"]')
    assert [hit.group for hit in plan_of(both, folder).hits] == [*range(6), *range(6)]


def test_ranges_reach_both_ends_exactly(folder: Path) -> None:
    text = PACK.replace("[0.1, 0.5]", "{ from = 0.3, to = 0.9, steps = 4 }")
    tones = list(dict.fromkeys(hit.axes["tone"] for hit in plan_of(text, folder).hits))
    assert tones[0] == 0.3
    assert tones[-1] == 0.9  # which 0.3 + (0.9 - 0.3) is not, in floats
    assert tones == pytest.approx([0.3, 0.5, 0.7, 0.9], rel=1e-15)


def test_a_geometric_range_has_equal_ratios(folder: Path) -> None:
    text = PACK.replace("[0.1, 0.5]", '{ from = 0.1, to = 0.8, steps = 4, law = "geometric" }')
    tones = list(dict.fromkeys(hit.axes["tone"] for hit in plan_of(text, folder).hits))
    assert tones == pytest.approx([0.1, 0.2, 0.4, 0.8], rel=1e-14)


def test_digests_follow_what_bytes_depend_on_and_nothing_else(folder: Path) -> None:
    def digests(text: str) -> list[str]:
        return [hit.recipe_digest for hit in plan_of(text, folder).hits]

    base = digests(PACK)
    assert len(set(base)) == 6
    renamed = PACK.replace("Plain pack", "Other title").replace("{tone}/{accent}", "{accent}/{tone}")
    assert digests(renamed) == base
    assert digests(PACK.replace('"4k7"', "4700")) == base
    assert not set(digests(PACK.replace('"4k7"', '"4k8"'))) & set(base)
    assert not set(digests(PACK.replace('"pcm16"', '"pcm24"'))) & set(base)
    # One hit more in a group may move the gain of all its hits; the other hits' bytes stay.
    wider = PACK.replace("[axes]", "[axes]\nS1 = [true, false]").replace("{tone}", "{S1}{tone}")
    more = digests(PACK.replace("steps = 3", "steps = 5"))
    assert not set(more) & set(base)
    assert set(base) <= set(digests(wider)) | set(base)


def test_switches_are_on_or_off_in_names(folder: Path) -> None:
    text = PACK.replace("[0.1, 0.5]", "[0.1]").replace("[axes]", "[axes]\nS1 = [true, false]")
    plan = plan_of(text.replace("{tone}", "{S1}"), folder)
    assert {hit.name.split("/")[0] for hit in plan.hits} == {"on", "off"}


@pytest.mark.parametrize(
    ("old", "new", "faults"),
    [
        ("tone = [", "tne = [", [
            "p.toml:18, files.name: unknown field '{tone}'; allowed: {tne}, {accent}, {circuit}, {number}; did you "
            "mean 'tne'?",
            "p.toml:13, axes.tne (circuit 'voice'): unknown setting 'tne'; allowed: a control (tone, accent), a part, "
            "an input or temperature; did you mean 'tone'?",
            "p.toml:13, axes.tne (circuit 'voice'): unknown setting 'tne'; allowed: a control (tone, accent), a part, "
            "an input or temperature; did you mean 'tone'?"]),
        ("0.5]", "1.5]", ["p.toml:13, axes.tone (circuit 'voice'): 1.5 is out of range; allowed: 0 to 1"]),
        ('"5V"', '"7V"', ["p.toml:14, axes.accent (circuit 'voice'): '7V' is out of range; allowed: 0V to 5V"]),
        ('"4k7"', '"4n7"', ["p.toml:16, fixed.R1 (circuit 'voice'): '4n7' is a letter code that does not go with ohm; "
                            "allowed: a value in ohm ('47k', '4.7 kohm', '4k7')"]),
        ("{tone}/", "", ["p.toml:18, files.name: two hits are called '1V'; allowed: a template that names every axis",
                         "p.toml:18, files.name: two hits are called '3V'; allowed: a template that names every axis",
                         "p.toml:18, files.name: two hits are called '5V'; allowed: a template that names every axis"]),
        ("{tone}/", "../{tone}", [
            f"p.toml:18, files.name: '../{tone}{accent}V' climbs out of the pack's folder; allowed: a relative path"
            for tone in (0.1, 0.5) for accent in (1, 3, 5)][:5] + ["p.toml:18, files.name: and 1 more of this kind"]),
        ("{tone}/", "{tone:d}/", ["p.toml:18, files.name: '{tone:d}/{accent}': Unknown format code 'd' for object of "
                                  "type 'float'; allowed: a number format such as {number:03d}"]),
        ('from = "1V"', 'law = "geometric", from = "0V"', ["p.toml:14, axes.accent: a geometric range from 0V to 5V; "
                                                           "allowed: two values above 0"]),
    ],
)  # fmt: skip
def test_a_pack_that_cannot_be_planned_is_told(old: str, new: str, faults: list[str], folder: Path) -> None:
    assert old in PACK
    assert faults_of(PACK.replace(old, new, 1), folder) == faults
