"""The table of checks in the documentation says what the code does."""

from pathlib import Path

import checks
from checks import ALL, spoils
from checks.check import Level
from flows.explain import checks_table

PAGE = Path(checks.__file__).parent / "README.md"
WRITE = (
    "python -c \"from pathlib import Path; from flows.explain import checks_table; Path('checks/README.md').write_text(checks_table())\""
)


def cells():
    """The table's cells by check."""
    rows = [line.strip("|").split(" | ") for line in checks_table().splitlines() if line.startswith("| `")]
    return {row[0].strip(" `"): [cell.strip() for cell in row] for row in rows}


def test_the_page_in_the_folder_is_what_the_code_says():
    assert PAGE.read_text(encoding="utf-8") == checks_table(), f"checks/README.md is out of date; write it anew: {WRITE}"


def test_every_check_has_a_line_with_its_level_limits_and_revision():
    table = cells()
    assert list(table) == [check.name for check in ALL]
    for check in ALL:
        _, level, title, measured, _, limits, spoiled, revision = table[check.name]
        assert (level, title, revision) == (f"each {check.level}", check.title.replace("|", "\\|"), str(check.revision))
        assert all(f"{getattr(check.limits, bound):g}" in limits for bound in check.limits.declared())
        assert measured
        assert "shape" not in measured
        assert "Return" not in measured
        assert spoiled == "the beat" if check.level is Level.BEAT else spoiled != "the beat"


def test_a_set_of_spoiled_indices_goes_by_its_name():
    table = cells()
    assert table["pressure-gain"][6] == f"`PRESSURE_GAIN`, {len(spoils.PRESSURE_GAIN)} indices"
    assert table["heart-rate-agreement"][6] in {"nothing", f"`TIME_SCALE`, {len(spoils.TIME_SCALE)} indices"}
