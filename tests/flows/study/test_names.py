"""Names, paths and the answer to a misspelt word."""

import pytest

from flows.study.names import did_you_mean, is_name, path_fault


@pytest.mark.parametrize(
    ("text", "is_one"), [("H-014", True), ("a" * 64, True), ("a" * 65, False), ("", False), (".", False), ("a\n", False)]
)
def test_a_name_is_what_the_contract_says(text, is_one):
    assert is_name(text) is is_one


@pytest.mark.parametrize("path", ["rest-1.csv", "deep/er/rest 1.csv", "é.csv", ".hidden", "a..b", "n" * 255])
def test_plain_paths_have_no_fault(path):
    assert path_fault(path) is None


@pytest.mark.parametrize(
    ("path", "fault"),
    [
        ("", "is empty"),
        ("/a", "is absolute"),
        ("..", "leaves the package"),
        ("a/../../b", "leaves the package"),
        ("./a", "has an empty part"),
        ("a//b", "has an empty part"),
        ("a/", "has an empty part"),
        ("a\\b", "holds a backslash or a colon"),
        ("c:a", "holds a backslash or a colon"),
        ("a\nb", "holds a control character"),
        ("a\x7f", "holds a control character"),
        ("\udcff", "is not valid Unicode"),
        ("n" * 256, "is too long"),
        ("é" * 128, "is too long"),
        ("/".join(["n" * 200] * 6), "is too long"),
    ],
)
def test_every_other_path_is_told_why(path, fault):
    assert path_fault(path) == fault


def test_a_misspelt_word_is_answered_with_the_nearest_else_with_all():
    assert did_you_mean("PRESURE", ["pressure", "volume"]) == "Did you mean 'pressure'?"
    assert did_you_mean("qqq", ["pressure", "volume"]) == "Known here: pressure, volume."
    assert did_you_mean("x", []) == ""
    assert did_you_mean("qqqqqq", [f"name-{number:02}" for number in range(30)]).endswith("name-23, ....")
