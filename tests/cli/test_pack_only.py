"""`kickrender pack --only`: the list that a listening sheet saves."""

from pathlib import Path

from tests.cli.conftest import Run


def test_only_the_hits_of_a_list_are_made(run: Run, folder: Path) -> None:
    (folder / "list.txt").write_text("0.5/3V\n")
    ran = run("pack", "pack.toml", "--only", "list.txt", "--out", "best")
    assert (ran.code, ran.out) == (0, "best: 1 hits, 1 of them rendered now\n")
    made = sorted(path.relative_to(folder / "best").as_posix() for path in (folder / "best").rglob("*.*"))
    assert [name for name in made if name.endswith(".wav")] == ["0.5/3V.wav"]


def test_a_list_with_a_stranger_is_wrong_input(run: Run, folder: Path) -> None:
    (folder / "list.txt").write_text("stranger\n")
    ran = run("pack", "pack.toml", "--only", "list.txt", "--out", "best")
    assert ran.code == 2
    assert ran.err == "kickrender: list.txt:1: no hit 'stranger'; allowed: a hit of 'Plain pack'\n"
    assert not (folder / "best").exists()
