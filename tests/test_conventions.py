"""The rules of the house that no linter knows."""

import ast
import importlib
import re
from collections import Counter
from pathlib import Path
from string import Formatter

import pandera.pandas as pa
import pytest

import checks
import flows
import metrics
from checks import ALL as CHECKS
from checks.check import Check, Level, Limits
from checks.tables import ALL as TABLES
from flows.sources import READERS
from flows.sources.reader import Reader
from metrics.indices import ALL as INDICES
from metrics.indices.card import Index

ROOT = Path(checks.__file__).parents[1]
PACKAGES = (checks, metrics, flows)
MODULES = sorted(path for package in PACKAGES for path in Path(package.__file__).parent.rglob("*.py"))
FOLDERS = ("acquisition", "run", "beat")
IN_THE_CONTRACT = (
    "HR, CO, EDV, ESV, SV, EF, EDP, ESP, Pmax, Ea, SW, dPdt_max, dPdt_min, tau, Pinf, Ees, V0, V100, V120, Ees_Ea, PRSW, Vw, dPdt_max_EDV, "
    "EDPVR_beta, EDPVR_stiffness, V20, V30, PVA, PE, efficiency, PWRmax, PWRmax_EDV2, EDVI, ESVI, SVI, CI, EaI"
)
CONTRACT = frozenset(IN_THE_CONTRACT.split(", "))
"""The indices of the contract: a published index, and one that a fault spoils, has its name from here."""

IN_UCUM = (
    "1, s, ms, h, Hz, /min, /mL, mL, mL/m2, L/min, L/min/m2, mm[Hg], mm[Hg]/s, mm[Hg]/mL, mm[Hg].m2/mL, mm[Hg].mL, mm[Hg]/s/mL, "
    "mm[Hg].mL/s, mm[Hg]/mL/s, W, mW, W/mL2, mW/mL2"
)
UCUM = frozenset(IN_UCUM.split(", "))
FAMILIES = {
    "post-premature": "cycle_length",
    "pressure-late": "damping",
    "edp-steadiness": "steadiness",
    "work-steadiness": "steadiness",
    "pressure-units": "units",
    "volume-units": "units",
    "swapped-channels": "wiring",
    "pressure-inverted": "wiring",
    "volume-inverted": "wiring",
    "loop-direction": "wiring",
    "pressure-flat": "standstill",
    "volume-flat": "standstill",
    "pressure-dropout": "standstill",
    "volume-dropout": "standstill",
}
"""Checks that stand in the file of the one they share a measure with."""

LONGEST_MODULE = 400
NO_MODULE_IS_CALLED = {"utils", "util", "helpers", "helper", "common", "misc", "base", "manager", "managers", "tools"}
LISTS = {"ALL", "READERS"}

shown = pytest.mark.parametrize


def parts(package, folder):
    """The modules of a folder of cards, with the cards each defines."""
    home = Path(package.__file__).parent / folder
    names = sorted(path.stem for path in home.glob("*.py") if path.stem != "__init__")
    return {name: importlib.import_module(f"{package.__name__}.{folder}.{name}") for name in names}


def cards(module, kind):
    """The cards a module defines, those it borrows from another left out."""
    text = Path(module.__file__).read_text(encoding="utf-8")
    targets = [target for node in ast.parse(text).body if isinstance(node, ast.Assign) for target in node.targets]
    assigned = {name.id for target in targets for name in ast.walk(target) if isinstance(name, ast.Name)}
    return {name: value for name, value in vars(module).items() if name in assigned and isinstance(value, kind)}


@shown("folder", FOLDERS)
def test_every_card_of_a_folder_stands_in_its_list_and_every_file_holds_one(folder):
    listed = importlib.import_module(f"checks.{folder}").ALL
    found = {name: cards(module, Check) for name, module in parts(checks, folder).items()}
    assert all(found.values()), [name for name, own in found.items() if not own]
    assert {card.name for own in found.values() for card in own.values()} == {card.name for card in listed}
    assert all(card.level == Level(folder) for card in listed)


def test_the_list_of_checks_is_the_three_folders_lists():
    listed = [card for folder in FOLDERS for card in importlib.import_module(f"checks.{folder}").ALL]
    assert [card.name for card in CHECKS] == [card.name for card in listed]


def test_every_index_stands_in_its_list():
    found = [card for module in parts(metrics, "indices").values() for card in cards(module, Index).values()]
    assert Counter(card.name for card in found) == Counter(card.name for card in INDICES)


def test_every_reader_stands_in_its_list():
    found = [card.name for module in parts(flows, "sources").values() for card in cards(module, Reader).values()]
    assert Counter(found) == Counter(reader.name for reader in READERS)


def test_every_table_stands_in_its_list():
    found = {
        value.Config.name
        for module in parts(checks, "tables").values()
        for value in vars(module).values()
        if isinstance(value, type) and issubclass(value, pa.DataFrameModel) and value.__module__ == module.__name__
    }
    assert found == {table.Config.name for table in TABLES}


def test_names_are_used_once():
    counts = Counter(card.name for card in (*CHECKS, *(index for index in INDICES if index.primary)))
    assert [name for name, count in counts.items() if count > 1] == []


@shown("check", CHECKS, ids=lambda check: check.name)
def test_a_check_is_named_in_words_like_its_file(check):
    assert re.fullmatch(r"[a-z]+(-[a-z]+)*", check.name)
    (home,) = [name for folder in FOLDERS for name, module in parts(checks, folder).items() if check in cards(module, Check).values()]
    family = {word.rstrip("s") for word in home.split("_")}
    assert home == check.name.replace("-", "_") or family & set(check.name.split("-")) or FAMILIES[check.name] == home


@shown("check", CHECKS, ids=lambda check: check.name)
def test_every_limit_says_where_it_comes_from_and_suspects_before_it_fails(check):
    for limits in filter(None, (check.limits, check.limits_rv)):
        assert limits.basis.strip()
        assert limits.declared()
        if limits.suspect_above is not None and limits.fail_above is not None:
            assert limits.suspect_above <= limits.fail_above
        if limits.suspect_below is not None and limits.fail_below is not None:
            assert limits.suspect_below >= limits.fail_below
        if limits.fail_above is not None and limits.fail_below is not None:
            assert limits.fail_below < limits.fail_above
        assert limits.declared() == check.limits.declared()
    assert Limits().basis == "house default"


@shown("check", CHECKS, ids=lambda check: check.name)
def test_every_card_can_be_read_by_a_person(check):
    assert check.title.strip()
    assert check.title[0].isupper()
    assert check.remedy.strip()
    assert not check.remedy.endswith(".")
    assert not check.reason.endswith(".")
    fields = {name for _, name, _, _ in Formatter().parse(check.reason) if name is not None}
    assert fields <= {"value", "limit", "trouble"}
    assert check.reason.format(value=1.25, limit=0.5, trouble="the file is cut").strip()
    assert check.revision >= 1
    assert check.run_kinds
    assert set(check.run_kinds) <= {"steady", "preload-reduction", "saline"}


@shown("check", CHECKS, ids=lambda check: check.name)
def test_what_a_check_spoils_and_requires_fits_its_level(check):
    assert check.spoils | check.concerns <= CONTRACT
    if check.level is Level.BEAT:
        assert not check.spoils
        assert not check.after_beats
        assert not check.corrected
    else:
        assert not check.required
        assert not check.concerns
    if check.corrected:
        assert check.spoils
    if check.after_beats:
        assert check.level is Level.RUN


@shown("card", [*CHECKS, *INDICES], ids=lambda card: card.name)
def test_units_are_ucum(card):
    assert card.unit in UCUM


@shown("index", INDICES, ids=lambda index: index.name)
def test_every_index_is_one_of_the_contract_s_and_says_what_it_is(index):
    assert index.name in CONTRACT
    assert index.title.strip()
    assert index.needs.strip()
    assert re.fullmatch(r"[a-z0-9:-]+", index.estimator)
    assert index.estimator != "pre-onset"
    assert index.revision >= 1


def test_every_index_can_be_withheld_by_some_fault():
    for index in INDICES:
        assert any(index.name in check.spoils for check in CHECKS), index.name


@shown("path", [path for path in MODULES if path.name == "__init__.py"], ids=lambda path: str(path.parent.relative_to(ROOT)))
def test_a_package_holds_a_docstring_and_at_most_a_list(path):
    docstring, *rest = ast.parse(path.read_text(encoding="utf-8")).body
    assert isinstance(docstring, ast.Expr)
    assert isinstance(docstring.value, ast.Constant)
    for node in rest:
        if isinstance(node, ast.Assign):
            assert {target.id for target in node.targets} <= LISTS
            assert isinstance(node.value, ast.Tuple)
        else:
            assert isinstance(node, ast.ImportFrom | ast.Import)


def test_modules_are_short_and_named_for_what_they_hold():
    for path in MODULES:
        assert len(path.read_text(encoding="utf-8").splitlines()) < LONGEST_MODULE, path
        assert path.stem not in NO_MODULE_IS_CALLED, path


def test_every_module_says_what_it_is_for():
    for path in MODULES:
        assert ast.get_docstring(ast.parse(path.read_text(encoding="utf-8"))), path


def test_tests_stand_in_no_package_and_have_names_of_their_own():
    tests = ROOT / "tests"
    assert not list(tests.rglob("__init__.py"))
    counts = Counter(path.name for path in tests.rglob("test_*.py"))
    assert [name for name, count in counts.items() if count > 1] == []


LEFT_OUT = {".git", ".venv", "tarn", "dist", "build", "__pycache__"}
TEXT = {".py", ".md", ".toml", ".txt", ".html", ".css", ".json", ".yaml", ".yml", ".ini", ".csv", ""}
FOLDERS_OF_A_MACHINE = re.compile(r"(?<![\w.<>/-])/" + r"(work|root|home|Users|mnt|private|tmp)/[\w.-]+")
ADDRESSES_OF_PACKAGES = re.compile(r"https?://\S*/simple\b|\b(index-url|extra-index-url|trusted-host)\b|\.whl\b.*https?://")


def texts():
    """Every text of the project, what a machine made left out."""
    for path in sorted(ROOT.rglob("*")):
        inside = path.relative_to(ROOT).parts
        made = any(part in LEFT_OUT or part.endswith((".egg-info", "_cache")) or part in {".hypothesis", ".benchmarks"} for part in inside)
        if not made and path.is_file() and path.suffix in TEXT:
            yield path, path.read_text(encoding="utf-8", errors="replace")


def test_no_file_names_a_folder_of_a_machine_or_a_package_registry():
    found = [
        f"{path.relative_to(ROOT)}: {hit.group()}"
        for path, text in texts()
        if path != Path(__file__)
        for pattern in (FOLDERS_OF_A_MACHINE, ADDRESSES_OF_PACKAGES)
        for hit in pattern.finditer(text)
    ]
    assert found == []


def documents():
    """The README and the contributors' guide, where this is a checkout that holds them."""
    return [path for path in (ROOT / "README.md", ROOT / "DEVELOPERS.md") if path.is_file()]


def test_files_named_by_the_documents_exist():
    for document in documents():
        named = re.findall(r"`((?:checks|metrics|flows)/[\w./]+)`", document.read_text(encoding="utf-8"))
        assert [name for name in named if not (ROOT / name).exists()] == [], document


def test_checks_and_indices_named_by_the_documents_exist():
    limits = {check.name: set(check.limits.declared()) for check in CHECKS}
    known = {card.name for card in (*CHECKS, *INDICES)}
    for document in documents():
        text = document.read_text(encoding="utf-8")
        explained = set(re.findall(r"beatgate explain ([\w-]+)", text)) - {"NAME"}
        assert explained <= known, document
        for name, bound in re.findall(r"\[limits\.([\w-]+)\]\s*(\w+) =", text):
            assert bound in limits[name], document


@shown("word", ["check", "index"])
def test_a_table_of_the_readme_lists_what_there_is(word):
    """A table whose first heading is the word names every card once; a README may do without such a table."""
    readme = ROOT / "README.md"
    known = {"check": {check.name for check in CHECKS}, "index": {index.name for index in INDICES}}[word]
    text = readme.read_text(encoding="utf-8") if readme.is_file() else ""
    table = re.search(rf"^\| ?{word} ?\|.*\n\|[-| :]+\n((?:\|.*\n)+)", text, re.MULTILINE | re.IGNORECASE)
    rows = re.findall(r"^\| ?`?([\w-]+)`? ?\|", table.group(1), re.MULTILINE) if table else sorted(known)
    assert Counter(rows) == Counter(known)
