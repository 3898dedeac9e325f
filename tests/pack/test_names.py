"""Names from templates: filled, safe on every file system, distinct."""

import pytest

from kickrender.pack.names import Label, fill, name_fault, name_faults, short_labels, template_faults


def test_a_template_is_filled_with_texts_and_formats() -> None:
    labels = {"pitch": Label("0.2", 0.2), "accent": Label("1.5V", 1.5), "number": Label("7", 7)}
    assert fill("{pitch}/{accent}-{number:03d}", labels) == "0.2/1.5V-007"
    assert fill("{pitch:.2f}", labels) == "0.20"


def test_equal_letters_are_equal_bytes() -> None:
    assert fill("caf{e}", {"e": Label("e\u0301", 0)}) == "caf\u00e9"


@pytest.mark.parametrize(
    ("template", "message"),
    [
        ("{pich}", "p: unknown field '{pich}'; allowed: {pitch}, {circuit}, {number}; did you mean 'pitch'?"),
        (
            "{pitch.real}",
            "p: unknown field '{pitch.real}'; allowed: {pitch}, {circuit}, {number}; did you mean 'pitch'?",
        ),
        ("{}", "p: unknown field '{}'; allowed: {pitch}, {circuit}, {number}"),
        ("{pitch", "p: '{pitch': expected '}' before end of string; allowed: {pitch}, {circuit}, {number}"),
        ("{pitch!r}", "p: '{pitch!r}'; allowed: a field, or a field and a number format such as {number:03d}"),
    ],
)
def test_a_wrong_template_is_told(template: str, message: str) -> None:
    assert [str(fault) for fault in template_faults(template, ["pitch"], "p")] == [message]


@pytest.mark.parametrize("name", ["a", "low/short-3V", "été 1", "a.b", "100%", "pack/1"])
def test_safe_names(name: str) -> None:
    assert name_fault(name) is None


@pytest.mark.parametrize(
    ("name", "reason"),
    [
        ("../a", "climbs out of the pack's folder"),
        ("a/../../b", "climbs out of the pack's folder"),
        ("/a", "is not relative"),
        ("C:/a", "is not relative"),
        ("a//b", "has an empty piece"),
        ("a/", "has an empty piece"),
        ("", "has an empty piece"),
        ("a\\b", "holds '\\\\'"),
        ("a\nb", "holds '\\n'"),
        ("a?", "holds '?'"),
        (".a", "begins with a dot"),
        ("-a", "begins with a dot, dash"),
        ("a ", "ends with a dot or space"),
        ("nul", "some systems reserve"),
        ("a/COM1.x", "some systems reserve"),
        ("x" * 201, "longer than 200 bytes"),
        ("Pack", "is taken by pack.json"),
    ],
)
def test_unsafe_names(name: str, reason: str) -> None:
    assert reason in (name_fault(name) or "")


def test_clashes_are_told_also_by_case_and_between_file_and_folder() -> None:
    faults = [str(fault) for fault in name_faults(["a", "a", "B", "b", "c", "c.wav/d"], "p")]
    assert faults == [
        "p: two hits are called 'a'; allowed: a template that names every axis",
        "p: 'B' and 'b' are one file; allowed: a template that names every axis",
        "p: 'c.wav' is a file and a folder; allowed: distinct names",
    ]


def test_many_faults_of_one_kind_are_counted() -> None:
    faults = name_faults(["../x"] * 8, "p")
    assert str(faults[5]) == "p: and 3 more of this kind"


@pytest.mark.parametrize(
    ("values", "texts"),
    [
        ([0.2, 0.2 + 0.7 / 3, 0.2 + 1.4 / 3, 0.9], ["0.2", "0.43", "0.67", "0.9"]),
        ([0.5], ["0.5"]),
        ([1000.0, 2000.0], ["1000", "2000"]),
        ([0.1234, 0.1235], ["0.1234", "0.1235"]),
        ([1e-9, 2e-9], ["0.000000001", "0.000000002"]),
    ],
)
def test_labels_are_short_and_distinct(values: list[float], texts: list[str]) -> None:
    assert short_labels(values) == texts
