"""Each command says what it found, or in one message what it needs; exit codes tell the two apart."""

import json
import subprocess
import sys
import types
from datetime import UTC, datetime, timedelta
from pathlib import Path

import pytest
from typer.testing import CliRunner

from flows import cli
from flows.errors import InputError
from flows.publish.refusal import GateRefused
from flows.sources.simulated.acquisition import Identity, Recipe, made, rest_and_ramp
from flows.sources.simulated.heart import HEARTS
from flows.sources.simulated.package import write_package

ROOT = Path(__file__).parents[2]
COMMANDS = ("demo", "check", "nightly", "schedule", "explain", "contract")


@pytest.fixture(scope="module")
def package(tmp_path_factory):
    folder = tmp_path_factory.mktemp("inbox") / "harbour" / "H-001-visit-1"
    recorded_at = datetime(2026, 2, 2, 9, 10, tzinfo=UTC)
    identity = Identity("tarn", "harbour", "H-001", "visit-1", "H-001-visit-1", recorded_at)
    write_package(folder, made(Recipe(identity, HEARTS[0], rest_and_ramp(), seed=5)), recorded_at + timedelta(hours=7))
    return folder


@pytest.fixture
def invoke(monkeypatch, capsys):
    """Return a function that runs the program in this process and returns (exit code, stdout, stderr)."""

    def run(*arguments):
        monkeypatch.setattr(sys, "argv", ["beatgate", *map(str, arguments)])
        with pytest.raises(SystemExit) as ended:
            cli.main()
        captured = capsys.readouterr()
        return ended.value.code or 0, captured.out, captured.err

    return run


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_explains_itself_with_an_example(command):
    result = CliRunner().invoke(cli.app, [command, "--help"])
    assert result.exit_code == 0
    assert f"Example: beatgate {command}" in result.output


def test_the_commands_are_these_and_no_others():
    result = CliRunner().invoke(cli.app, ["--help"])
    assert {command.callback.__name__ for command in cli.app.registered_commands} == set(COMMANDS)
    assert "research and quality assurance only" in " ".join(result.output.split())


def test_check_leads_with_the_verdict_and_ends_with_the_caution(invoke, package):
    code, out, err = invoke("check", package)
    lines = out.splitlines()
    assert (code, err) == (0, "")
    assert lines[0].startswith("ACCEPTED  H-001-visit-1 (harbour, subject H-001, visit-1), LV, ")
    assert lines[-1].startswith("For research and quality assurance only; not for diagnosis or treatment.")
    assert any(line.strip().startswith("baseline  Ees ") for line in lines)


def test_check_as_json_holds_the_tables_in_the_contracts_columns(invoke, package):
    code, out, _ = invoke("check", package, "--json")
    tables = json.loads(out)
    assert code == 0
    assert set(tables) == {"acquisition", "runs", "beats", "rejections", "indices", "changes"}
    assert tables["acquisition"]["recorded_at"] == "2026-02-02T09:10:00Z"
    assert len(tables["runs"]) == 2
    assert len(tables["beats"]) == tables["acquisition"]["beats"] > 10
    assert {row["index"] for row in tables["indices"]} >= {"EDV", "ESP", "Ees", "V0", "PRSW"}


def test_check_writes_nothing(invoke, package):
    before = {path: path.stat().st_mtime_ns for path in package.rglob("*")}
    invoke("check", package)
    assert {path: path.stat().st_mtime_ns for path in package.rglob("*")} == before


def test_check_follows_a_link_the_user_names(invoke, package, tmp_path):
    (tmp_path / "link").symlink_to(package)
    assert invoke("check", tmp_path / "link")[0] == 0


def test_input_that_cannot_be_used_is_one_message_and_exit_code_2(invoke, tmp_path):
    code, out, err = invoke("check", tmp_path / "absent")
    assert (code, out) == (2, "")
    assert err == f"{tmp_path / 'absent'}: there is no such folder. Name the folder that holds acquisition.json.\n"
    (tmp_path / "empty").mkdir()
    code, out, err = invoke("check", tmp_path / "empty")
    assert (code, out) == (2, "")
    assert "manifest-sha256.txt" in err


def test_an_altered_package_names_the_file(invoke, package, tmp_path):
    twin = tmp_path / "twin"
    twin.mkdir()
    for path in package.iterdir():
        (twin / path.name).write_bytes(path.read_bytes())
    (twin / "baseline-rest.csv").write_text("t,p\n")
    code, _, err = invoke("check", twin)
    assert code == 2
    assert "baseline-rest.csv: does not have the listed SHA-256" in err


def test_an_unknown_command_is_a_usage_error(invoke):
    code, _, err = invoke("chek")
    assert code == 2
    assert "No such command" in err


def test_explain_answers_a_name_and_a_misspelt_one(invoke):
    code, out, _ = invoke("explain", "loop-closure")
    assert code == 0
    assert out.startswith("loop-closure")
    code, out, err = invoke("explain", "loop-closur")
    assert (code, out) == (2, "")
    assert "Did you mean 'loop-closure'?" in err


def test_contract_prints_schemas_and_the_dictionary(invoke):
    code, out, _ = invoke("contract")
    printed = json.loads(out)
    assert code == 0
    assert set(printed["files"]) == {"acquisition.json", "protocol.toml"}
    assert "acquisitions" in {table["name"] for table in printed["tables"]["tables"]}


def stand_in(monkeypatch, name, **functions):
    module = types.ModuleType(name)
    for key, function in functions.items():
        setattr(module, key, function)
    monkeypatch.setitem(sys.modules, name, module)


def test_a_night_that_ran_is_exit_code_0_whatever_it_found(invoke, monkeypatch, tmp_path):
    seen = []

    def run_night(study, options):
        seen.append((study, options.retry_failed))
        return "harbour  1 rejected\nlook at: much"

    stand_in(monkeypatch, "flows.nightly", run_night=run_night)
    code, out, _ = invoke("nightly", tmp_path)
    assert (code, out) == (0, "harbour  1 rejected\nlook at: much\n")
    invoke("nightly", tmp_path, "--retry-failed")
    assert seen == [(tmp_path.resolve(), False), (tmp_path.resolve(), True)]


def test_a_night_without_a_study_is_exit_code_2(invoke, monkeypatch, tmp_path):
    def run_night(study, _options):
        problem = "does not exist"
        raise InputError(problem, file=str(study), remedy="Write one.")

    stand_in(monkeypatch, "flows.nightly", run_night=run_night)
    code, out, err = invoke("nightly", tmp_path)
    assert (code, out) == (2, "")
    assert err == f"{tmp_path.resolve()}: does not exist. Write one.\n"


def test_a_refused_release_is_exit_code_1_with_every_problem(invoke, monkeypatch, tmp_path):
    def run_night(study, _options):
        raise GateRefused([f"beats: 3 rows of {study.name}", "runs: 1 row"])

    stand_in(monkeypatch, "flows.nightly", run_night=run_night)
    code, out, err = invoke("nightly", tmp_path)
    assert (code, out) == (1, "")
    assert "the last release stands" in err
    assert "beats: 3 rows" in err
    assert "runs: 1 row" in err


def test_a_failed_disk_is_no_success(invoke, monkeypatch, tmp_path):
    def run_night(_study, _options):
        raise OSError(28, "No space left on device", "store/objects")

    stand_in(monkeypatch, "flows.nightly", run_night=run_night)
    with pytest.raises(OSError, match="No space left"):
        invoke("nightly", tmp_path)


def test_a_demo_that_missed_something_is_exit_code_1(invoke, monkeypatch, tmp_path):
    class DemoError(Exception):
        pass

    def run_demo(folder):
        message = f"H-001 in {folder.name}: not found"
        raise DemoError(message)

    stand_in(monkeypatch, "flows.demo", DemoError=DemoError, run_demo=run_demo)
    code, _, err = invoke("demo", tmp_path / "tarn")
    assert code == 1
    assert "H-001 in tarn: not found" in err


def test_schedule_serves_the_study(invoke, monkeypatch, tmp_path):
    served = []
    stand_in(monkeypatch, "flows.schedule", serve=served.append)
    assert invoke("schedule", tmp_path)[0] == 0
    assert served == [tmp_path.resolve()]


def test_check_imports_no_orchestration_database_or_table_library(package):
    program = (
        "import sys\nfrom flows import cli\nsys.argv = ['beatgate', 'check', sys.argv[1]]\n"
        "try:\n    cli.main()\nexcept SystemExit as ended:\n    assert not ended.code\n"
        "heavy = {'prefect', 'great_expectations', 'sqlalchemy', 'pandas', 'pandera', 'jinja2', 'rich', 'httpx', 'matplotlib'}\n"
        "sys.stderr.write(' '.join(sorted(heavy & set(sys.modules))))\n"
    )
    done = subprocess.run([sys.executable, "-c", program, str(package)], check=True, cwd=ROOT, capture_output=True, text=True)
    assert done.stderr == ""


def test_asking_for_help_imports_no_arithmetic():
    program = "import sys\nimport flows.cli\nprint(' '.join({'numpy', 'scipy', 'pydantic', 'pyarrow'} & set(sys.modules)))"
    done = subprocess.run([sys.executable, "-c", program], check=True, cwd=ROOT, capture_output=True, text=True)
    assert done.stdout.strip() == ""
