from datetime import UTC, datetime, timedelta, timezone

import pytest

from flows.reports.wording import (
    counted,
    instant,
    letter,
    listing,
    number,
    number_ranges,
    quantity,
    sentence,
    split_reasons,
    title_from_name,
    unit_words,
    visible,
)


@pytest.mark.parametrize(
    ("value", "words"),
    [
        (0, "0"),
        (-0.0, "0"),
        (1234.4, "1234"),
        (0.2634, "0.263"),
        (-6.04, "\u22126.04"),
        (12.0, "12"),
        (0.00012345, "0.000123"),
        (1e-14, "0"),
        (None, "\u2013"),
        (float("nan"), "\u2013"),
        (float("inf"), "\u2013"),
        ("7", "\u2013"),
        (True, "\u2013"),
    ],
)
def test_a_number_has_one_form_and_no_exponent(value, words):
    assert number(value) == words


def test_units_are_read_as_on_paper():
    assert unit_words("mm[Hg]/mL") == "mmHg/mL"
    assert unit_words("mm[Hg].mL") == "mmHg\u00b7mL"
    assert unit_words("1") == unit_words(None) == ""
    assert quantity(70, "/min") == "70 per min"
    assert quantity(None, "mL") == "\u2013"
    assert quantity(0.5) == "0.5"


def test_counts_and_lists():
    assert [counted(1, "beat"), counted(0, "beat"), counted(2, "index"), counted(1, "index")] == [
        "1 beat",
        "0 beats",
        "2 indices",
        "1 index",
    ]
    assert [listing([]), listing(["a"]), listing(["a", "b"]), listing(["a", "b", "c"])] == ["", "a", "a and b", "a, b and c"]
    assert listing(list("abcdefgh"), most=3) == "a, b and 6 more"


def test_beat_numbers_are_drawn_together_and_none_is_lost():
    assert number_ranges([9, 3, 4, 5, 9]) == "3\u20135, 9"
    assert number_ranges([]) == ""
    assert number_ranges(range(1, 40, 2), most=3) == "1, 3, 5 and 17 more"


def test_instants_are_told_in_utc():
    lisbon = datetime(2026, 7, 4, 9, 12, tzinfo=timezone(timedelta(hours=1)))
    assert instant(lisbon) == instant("2026-07-04T09:12:00+01:00") == "2026-07-04 08:12 UTC"
    assert instant(datetime(2026, 7, 4, 8, 12, tzinfo=UTC)) == "2026-07-04 08:12 UTC"
    assert instant("last Tuesday") == "last Tuesday"
    assert instant(None) == "\u2013"


def test_letters_go_on_after_z():
    assert [letter(place) for place in (0, 25, 26, 27, 701, 702)] == ["A", "Z", "AA", "AB", "ZZ", "AAA"]


def test_reasons_come_joined_or_as_a_list_or_not_at_all():
    assert split_reasons("a;b; c") == split_reasons(["a", "b", "c"]) == ("a", "b", "c")
    assert split_reasons(None) == split_reasons("") == split_reasons(4) == ()


def test_sentences_and_titles():
    assert sentence("the loop ends early") == "The loop ends early."
    assert sentence("Why?") == "Why?"
    assert sentence(None) == ""
    assert title_from_name("range-edv") == "Range EDV"


def test_what_hides_or_turns_text_round_is_spelled_out():
    assert visible("a\u202eb\x00c\udc80") == "a\\u202eb\\u0000c\\udc80"
    assert visible("kept\nas it is") == "kept\nas it is"
    assert visible(None) == "\u2013"
    assert visible(7) == 7
