"""One table of every worked value: what the program makes of it beside what is published or was worked apart from it.

``python -m tests.outside.worked_table`` writes `tests/outside/README.md` anew; a test holds the page against the code.
"""

import importlib
from pathlib import Path

HOME = Path(__file__).parent
PAGE = HOME / "README.md"
HEAD = ("value of", "here", "there", "within", "whose method", "method", "value")


def tables():
    """Every list of worked values in this folder, by the name of the file it stands in."""
    names = sorted(path.stem for path in HOME.glob("test_worked_*.py"))
    modules = {name: importlib.import_module(f"tests.outside.{name}") for name in names}
    return {name: module.TABLE for name, module in modules.items() if hasattr(module, "TABLE")}


def worked_table():
    """The text of the page."""
    rows = [
        (row.quantity, f"{row.by():.6g}", f"{row.expected:.6g}", f"{row.within:.1g}", row.source, row.method, row.value)
        for table in tables().values()
        for row in table
    ]
    lines = ["| " + " | ".join(cell.replace("|", "\\|") for cell in row) + " |" for row in (HEAD, *rows)]
    lines.insert(1, "|" + "---|" * len(HEAD))
    told = (
        f"{len(rows)} values, to six digits: what the program makes of each, what it should be, and how near it must come. The last "
        "two columns say how method and value came here: `read` in the source named, from `memory` of it, or `computed` apart from "
        "this program."
    )
    also = (
        "Further outside authorities stand in the other files of this folder: certified data sets, reference libraries for lines, curves "
        "and areas, and real electrocardiograms against independent detectors."
    )
    written = "Written by `python -m tests.outside.worked_table`; a test holds it against the code."
    return "\n".join(["# Worked values", "", told, "", also, "", written, "", *lines, ""])


if __name__ == "__main__":
    PAGE.write_text(worked_table(), encoding="utf-8")
