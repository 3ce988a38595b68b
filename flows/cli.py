"""The command line: each command parses, calls one function and prints what came out.

Exit codes: 0 when the work was done, whatever was found; 2 when the input does not allow it; 1 when something else went wrong. A
command imports what it needs only when it runs.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import Annotated

import typer

from flows.errors import InputError

app = typer.Typer(
    name="beatgate",
    help="Check pressure-volume acquisitions beat by beat, night by night. For research and quality assurance only.",
    add_completion=False,
    no_args_is_help=True,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)


@app.command(epilog="Example: beatgate demo tarn")
def demo(folder: Annotated[Path, typer.Argument(help="A new or empty folder.")] = Path("tarn")) -> None:
    """Make the invented study Tarn, run one night over it, and show what was put in beside what was found."""
    from flows.demo import DemoError, run_demo  # noqa: PLC0415

    try:
        run_demo(folder)
    except DemoError as failure:
        sys.stderr.write(f"The demo did not find what was put in:\n{failure}\n")
        raise typer.Exit(1) from None


@app.command(epilog="Example: beatgate check inbox/harbour/H-014-baseline")
def check(
    package: Annotated[Path, typer.Argument(help="A folder with acquisition.json, signal files and manifest-sha256.txt.")],
    *,
    json: Annotated[bool, typer.Option("--json", help="Print the tables as JSON instead.")] = False,
) -> None:
    """Look at one package before it is sent: verdict, reasons, indices. Nothing is written."""
    from flows.check_package import check_package  # noqa: PLC0415
    from flows.terminal import tables_json, verdict_lines  # noqa: PLC0415

    if not package.is_dir():
        problem = "there is no such folder"
        raise InputError(problem, file=str(package), remedy="Name the folder that holds acquisition.json.")
    assessment = check_package(package.resolve())
    sys.stdout.write((tables_json(assessment) if json else "\n".join(verdict_lines(assessment))) + "\n")


@app.command(epilog="Example: beatgate nightly /srv/studies/tarn")
def nightly(
    study: Annotated[Path, typer.Argument(help="A folder with protocol.toml and inbox/.")],
    *,
    retry_failed: Annotated[bool, typer.Option("--retry-failed", help="Assess again what took too long or broke the program.")] = False,
) -> None:
    """Take in what sites uploaded, assess what is new, and publish one release."""
    from flows.nightly import run_night  # noqa: PLC0415
    from flows.publish.refusal import GateRefused  # noqa: PLC0415
    from flows.steps.opening import Options  # noqa: PLC0415

    try:
        result = run_night(study.resolve(), Options(retry_failed=retry_failed))
    except GateRefused as refusal:
        problems = "\n".join(f"  {problem}" for problem in refusal.problems)
        sys.stderr.write(f"Nothing was published, the last release stands. The tables break a promise:\n{problems}\n")
        raise typer.Exit(1) from None
    sys.stdout.write(f"{result}\n")


@app.command(epilog="Example: beatgate schedule /srv/studies/tarn")
def schedule(study: Annotated[Path, typer.Argument(help="A folder with protocol.toml and inbox/.")]) -> None:
    """Stay and run the study's night once a day."""
    from flows.schedule import serve  # noqa: PLC0415

    serve(study.resolve())


@app.command(epilog="Example: beatgate explain loop-closure")
def explain(name: Annotated[str, typer.Argument(help="The name of a check or of an index.")]) -> None:
    """Say what a check or an index is: what it measures, its limits, and where they come from."""
    from flows.explain import explain as explanation  # noqa: PLC0415

    sys.stdout.write(f"{explanation(name)}\n")


@app.command(epilog="Example: beatgate contract > contract.json")
def contract() -> None:
    """Print the contract as JSON: schemas of acquisition.json and protocol.toml, and the dictionary of the published tables."""
    import json  # noqa: PLC0415

    from flows.publish.dictionary import dictionary  # noqa: PLC0415
    from flows.study.contract import json_schemas  # noqa: PLC0415

    sys.stdout.write(json.dumps({"files": json_schemas(), "tables": dictionary()}, indent=1, ensure_ascii=False) + "\n")


def main() -> None:
    """Run the command line; input that cannot be used is one message on stderr and exit code 2."""
    try:
        app()
    except InputError as refusal:
        sys.stderr.write(f"{refusal}\n")
        sys.exit(2)


if __name__ == "__main__":
    main()
