"""The command line: the roof. It may import everything, inside its functions; nothing imports it.

Only typer is imported here, so that `packmime --help` answers at once.
"""

from __future__ import annotations

import io
import sys
from pathlib import Path
from typing import Annotated

import typer

from sequencer.cli.answers import answers

app = typer.Typer(
    name="packmime",
    help="Charger acceptance tests on lab instruments that stand in for a lithium-ion tool pack.",
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
)
bench_app = typer.Typer(
    help="Look at a bench, bring it to its safe state, serve the virtual one.",
    no_args_is_help=True,
    rich_markup_mode=None,
)
app.add_typer(bench_app, name="bench")

_SPEC = "Specification: path, or bare name of one that ships."
_BENCH = "Bench file: path, or bare name of one that ships."
_CHARGER = "Virtual charger: path, or bare name of one that ships; only on a virtual bench."


@app.callback(invoke_without_command=True)
def _top(version: Annotated[bool, typer.Option("--version", help="Print the version and leave.")] = False) -> None:
    if version:
        from sequencer.engine.manifest import program_version

        typer.echo(program_version())
        raise typer.Exit


@app.command("run")
@answers
def run(
    procedure: Annotated[str, typer.Argument(help="Procedure: path, or bare name of one that ships.")],
    bench: Annotated[str, typer.Option(help=_BENCH)] = "virtual",
    spec: Annotated[str, typer.Option(help=_SPEC)] = "sprayer",
    pack: Annotated[str | None, typer.Option(help="Pack; default: the one that the specification names.")] = None,
    charger: Annotated[str | None, typer.Option(help=_CHARGER)] = None,
    order: Annotated[str | None, typer.Option(help="Order: lab, customer, sample, persons.")] = None,
    out: Annotated[str | None, typer.Option(metavar="<path>", help="Folder for the record; new or empty.")] = None,
    set_: Annotated[list[str] | None, typer.Option("--set", metavar="NAME=VALUE", help="Change a parameter.")] = None,
    only: Annotated[list[str] | None, typer.Option(metavar="STEP", help="Carry out only steps of this kind.")] = None,
    seed: Annotated[int, typer.Option(min=0, help="Seed of the virtual bench.")] = 1,
) -> None:
    """Carry out a procedure and judge what it showed."""
    from sequencer.cli.running import folder_of, run_command
    from sequencer.engine.inputs import Asked, changes_of

    asked = Asked(procedure, spec, pack, bench, changes_of(set_ or []), seed, order)
    run_command(asked, charger, folder_of(out), only or [])


@app.command("check")
@answers
def check(
    files: Annotated[
        list[str] | None, typer.Argument(metavar="FILE...", help="Files to check; a procedure is planned.")
    ] = None,
    bench: Annotated[str, typer.Option(help=_BENCH)] = "virtual",
    spec: Annotated[str, typer.Option(help=_SPEC)] = "sprayer",
    pack: Annotated[str | None, typer.Option(help="Pack; default: the one that the specification names.")] = None,
    charger: Annotated[str | None, typer.Option(help=_CHARGER)] = None,
    set_: Annotated[list[str] | None, typer.Option("--set", metavar="NAME=VALUE", help="Change a parameter.")] = None,
    schema: Annotated[str | None, typer.Option(metavar="KIND", help="Print the JSON Schema of a kind of file.")] = None,
) -> None:
    """Validate files, touch nothing, print the plan of a procedure."""
    from sequencer.cli.checking import check_command

    check_command(files or [], bench, spec, pack, charger, set_ or [], schema)


@app.command("judge")
@answers
def judge(
    record: Annotated[Path, typer.Argument(help="Folder that a run wrote.")],
    spec: Annotated[str | None, typer.Option(help="Another specification (a deviation).")] = None,
    rule: Annotated[str | None, typer.Option(help="simple or guarded, for every limit (a deviation).")] = None,
    reason: Annotated[str | None, typer.Option(help="Why it is judged again.")] = None,
    person: Annotated[str | None, typer.Option(help="Who judges.")] = None,
    json: Annotated[bool, typer.Option("--json", help="Print the verdicts as one JSON document.")] = False,
) -> None:
    """Judge a record again; what was judged before stays."""
    from sequencer.cli.judging import judge_command

    judge_command(record, spec, rule, reason, person, json)


@app.command("classify")
@answers
def classify(
    log: Annotated[Path, typer.Argument(help="CSV of one charge: time, voltage, current (charging positive).")],
    json: Annotated[bool, typer.Option("--json", help="Print one JSON document.")] = False,
    plot: Annotated[Path | None, typer.Option(help="Draw the charge into this file (.svg, .png, .pdf).")] = None,
    columns: Annotated[
        str | None, typer.Option(metavar="time=...,voltage=...,current=...", help="Names of the columns.")
    ] = None,
) -> None:
    """Say which charge algorithm a foreign log shows."""
    from sequencer.cli.classifying import classify_command

    classify_command(log, json, plot, columns)


@app.command("assay")
@answers
def assay(
    procedure: Annotated[str, typer.Argument(help="Procedure: path, or bare name of one that ships.")],
    spec: Annotated[
        list[str] | None, typer.Option(help="Specification with a charger of its name; default: all that ship.")
    ] = None,
    defects: Annotated[str, typer.Option(metavar="all|NAME,...", help="Defects to try.")] = "all",
    seeds: Annotated[int, typer.Option(min=1, help="How many seeds: sizes, instruments, chargers.")] = 1,
    seed: Annotated[int, typer.Option(min=0, help="The first of them.")] = 1,
    keep: Annotated[Path | None, typer.Option(help="Folder to keep the records in; new or empty.")] = None,
    json: Annotated[bool, typer.Option("--json", help="Print one JSON document.")] = False,
) -> None:
    """Try a procedure on virtual chargers, sound ones and wrong ones."""
    from sequencer.cli.assaying import assay_command

    assay_command(procedure, spec or [], defects, seeds, seed, keep, json)


@bench_app.command("show")
@answers
def bench_show(
    bench: Annotated[str, typer.Argument(help=_BENCH)] = "virtual",
    charger: Annotated[str | None, typer.Option(help=_CHARGER)] = None,
) -> None:
    """Open every link, show who answers and what every output does; changes nothing."""
    from sequencer.cli.benches import show_command

    show_command(bench, charger)


@bench_app.command("safe")
@answers
def bench_safe(
    bench: Annotated[str, typer.Argument(help=_BENCH)] = "virtual",
    charger: Annotated[str | None, typer.Option(help=_CHARGER)] = None,
) -> None:
    """Bring a bench to its safe state, in order, and say whether that is proven."""
    from sequencer.cli.benches import safe_command

    safe_command(bench, charger)


@bench_app.command("serve")
@answers
def bench_serve(
    bench: Annotated[str, typer.Argument(help=_BENCH)] = "virtual",
    charger: Annotated[str, typer.Option(help=_CHARGER)] = "sprayer",
    seed: Annotated[int, typer.Option(min=0, help="Seed of the virtual bench.")] = 1,
    port: Annotated[int, typer.Option(min=0, max=65000, help="First TCP port; 0: any free ones.")] = 5025,
) -> None:
    """Serve the virtual bench on this computer in wall time, for any SCPI client, until Ctrl-C."""
    from sequencer.cli.benches import serve_command

    serve_command(bench, charger, seed, port)


def main() -> None:
    """Entry point of the `packmime` command."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors="replace")  # a terminal that has no Ω still gets the rest of the sentence
    app()
