"""The table of worked values says what the code does."""

from tests.outside.worked_table import PAGE, tables, worked_table


def test_the_page_in_the_folder_is_what_the_code_says():
    assert PAGE.read_text(encoding="utf-8") == worked_table(), "out of date; write it anew: python -m tests.outside.worked_table"


def test_no_value_stands_twice_and_there_are_enough():
    quantities = [row.quantity for table in tables().values() for row in table]
    assert len(quantities) >= 40
    assert len(set(quantities)) == len(quantities)


def test_every_row_of_the_page_shows_two_numbers_that_agree():
    rows = [line.strip("| ").split(" | ") for line in worked_table().splitlines() if line.startswith("| ")][1:]
    assert len(rows) == sum(len(table) for table in tables().values())
    for row in rows:
        here, there, within = (float(cell) for cell in row[1:4])
        assert abs(here - there) <= 2.0 * within + 2e-6 * abs(there), row
