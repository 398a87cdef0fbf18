"""`leafturn …`: reads the words of a command, calls the pipeline, shows what came of it.

Exit codes: 0 done, 1 refused input, 2 usage, 3 a service it needs did not answer, 130 stopped by a person.
`--json` prints one JSON object instead of words.
"""

import json
import signal
import sys
from collections.abc import Mapping, Sequence
from contextlib import contextmanager
from datetime import datetime
from pathlib import Path
from typing import Annotated, Any

import typer
from rich.console import Console
from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

from rules.digests import plain
from service import __version__, wordy
from service import settings as settings_file
from service.clock import SystemClock
from service.errors import BadInput, LeafturnError, Unreachable, UnsafeText

COORDINATOR, OFFICER, OPERATOR = "For the coordinator", "For field officers and imports", "For the operator"

STOPPED = 130  # what a shell says of a command that was interrupted

app = typer.Typer(
    name="leafturn",
    help="From paddock observations and local weather to a signed weekly digest for each grower.",
    no_args_is_help=True,
    pretty_exceptions_enable=False,
    add_completion=False,
    context_settings={"help_option_names": ["-h", "--help"]},
)
edition = typer.Typer(no_args_is_help=True, help="Draft, review, sign and send a week's digest.")
app.add_typer(edition, name="edition", rich_help_panel=COORDINATOR)

Json = Annotated[bool, typer.Option("--json", help="Print one JSON object instead of words.")]
Config = Annotated[Path | None, typer.Option("--settings", help="The settings file; else leafturn.toml here.")]
District = Annotated[str, typer.Argument(help="The district's id.")]
EditionId = Annotated[str, typer.Argument(help="The edition, such as north-2026-W20.")]

Outcome = Mapping[str, Any]


def main(argv: Sequence[str] | None = None) -> None:
    """The installed command. Being asked to end (SIGTERM) is taken as Ctrl-C is: what is under way is put back."""
    signal.signal(signal.SIGTERM, signal.default_int_handler)
    app(args=None if argv is None else list(argv))


@app.command(rich_help_panel=OPERATOR)
def init(
    file: Annotated[Path, typer.Argument(help="Where to write it.")] = Path(settings_file.FILE_NAME),
    as_json: Json = False,
) -> None:
    """Write a commented settings file, make the link keys and the empty store."""
    with _answering(as_json) as answer:
        answer(_steps().init(file))


@app.command("doctor", rich_help_panel=OPERATOR)
def doctor_command(config: Config = None, as_json: Json = False) -> None:
    """Check settings, store, mail server, clock and disk, in plain words."""
    from service import doctor

    with _answering(as_json) as answer:
        findings = doctor.examine(config, SystemClock())
        if as_json:
            answer({"findings": findings, "well": all(found["well"] for found in findings)})
        else:
            answer({found["what"]: ("" if found["well"] else "TO MEND: ") + found["text"] for found in findings})
        if not all(found["well"] for found in findings):
            raise typer.Exit(max(found["exit_code"] for found in findings))


@app.command(rich_help_panel=OPERATOR)
def demo(
    folder: Annotated[Path, typer.Option(help="Where to put what it makes.")] = Path("var/demo"),
    as_json: Json = False,
) -> None:
    """Run the main job on an invented district network and leave the digests to look at."""
    from demo_network import walk  # the demo is not loaded by any other command

    with _answering(as_json) as answer:
        answer(walk.run(folder, Console(stderr=True, quiet=as_json)))


@app.command(rich_help_panel=OPERATOR)
def serve(config: Config = None) -> None:
    """Serve the pages that mailed links open: the week's digest, and the way out."""
    with _answering(False):
        import uvicorn  # the server and the web framework are not loaded by any other command

        from service.web import app

        settings = settings_file.read(config)
        with _store(config) as store:
            pages = app.make_app(_steps().Pages(store, settings))
            uvicorn.Server(app.serving(pages, settings.web.host, settings.web.port)).run()


@app.command(rich_help_panel=OFFICER)
def take(
    file: Annotated[Path, typer.Argument(help="Observations, station days, or a file of the network.")],
    history: Annotated[bool, typer.Option("--history", help="Past seasons: knowable from their own dates.")] = False,
    district: Annotated[str | None, typer.Option(help="District of rows that name none.")] = None,
    source: Annotated[str, typer.Option(help="Who the record ids belong to.")] = "csv",
    keep_good: Annotated[
        Path | None, typer.Option("--keep-good", help="Take the good rows; write the others here, to mend.")
    ] = None,
    revise: Annotated[bool, typer.Option("--revise", help="Changed rows under known ids become new versions.")] = False,
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Take a file in: all of it, or nothing and a list of what to mend."""
    from service import taking

    with _answering(as_json) as answer, _store(config) as store, _progress(as_json) as progress:
        taken = taking.take(
            store,
            file,
            clock=SystemClock(),
            progress=progress,
            history=history,
            district=district,
            source=source,
            keep_good=keep_good,
            revise=revise,
        )
        answer(taken)


@app.command(rich_help_panel=COORDINATOR)
def run(
    district: District,
    as_of: Annotated[
        datetime | None, typer.Option("--as-of", help="Say what would have been said then (local time).")
    ] = None,
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Run the rules now, or as of a past moment, and list what they say."""
    with _answering(as_json) as answer, _store(config) as store:
        answer(_steps().run_rules(store, district, clock=SystemClock(), as_of=as_of))


@edition.command("draft")
def edition_draft(district: District, config: Config = None, as_json: Json = False) -> None:
    """Draft this week's digest from what is known now."""
    with _answering(as_json) as answer, _store(config) as store:
        answer(_steps().draft(store, district, clock=SystemClock()))


@edition.command("show")
def edition_show(
    id: EditionId,
    reader: Annotated[str | None, typer.Option(help="Show this reader's own digest as plain text.")] = None,
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Show an edition's statements, how many readers each touches, and what the gate marks."""
    with _answering(as_json) as answer, _store(config) as store:
        answer(_steps().show(store, id, reader=reader))


@edition.command("hold")
def edition_hold(
    id: EditionId,
    by: Annotated[str, typer.Option(help="Your person id.")],
    reason: Annotated[str, typer.Option(help="Why; kept in the audit.")],
    statement: Annotated[str | None, typer.Argument(help="One statement; without it, the whole edition.")] = None,
    lift: Annotated[bool, typer.Option("--lift", help="Lift such a hold instead.")] = False,
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Hold one statement back, or the whole edition."""
    with _answering(as_json) as answer, _store(config) as store:
        answer(_steps().hold(store, id, statement, by=by, reason=reason, clock=SystemClock(), lift=lift))


@edition.command("sign")
def edition_sign(
    id: EditionId,
    by: Annotated[str, typer.Option(help="Your person id; the digest carries your name.")],
    note: Annotated[str, typer.Option(help="A few words of your own to every reader.")] = "",
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Sign: freeze recipients and wording. Nothing leaves before it is sent."""
    with _answering(as_json) as answer, _store(config) as store, _progress(as_json) as progress:
        settings = settings_file.read(config)
        answer(_steps().sign(store, settings, id, by=by, note=note, clock=SystemClock(), progress=progress))


@edition.command("send")
def edition_send(id: EditionId, config: Config = None, as_json: Json = False) -> None:
    """Let a signed edition go, and deliver it. Run it again to send what is left."""
    with _answering(as_json) as answer, _store(config) as store, _progress(as_json) as progress:
        answer(_steps().send(store, settings_file.read(config), id, clock=SystemClock(), progress=progress))


@app.command(rich_help_panel=COORDINATOR)
def trail(
    id: EditionId,
    reader: Annotated[str, typer.Argument(help="The reader's id.")],
    sentence: Annotated[str | None, typer.Option(help="Part of the sentence; without it, all of them.")] = None,
    config: Config = None,
    as_json: Json = False,
) -> None:
    """Take a sentence back to its rows and rule, and say the digest again to equal bytes."""
    with _answering(as_json) as answer, _store(config) as store:
        found = _steps().trail(store, id, reader, sentence=sentence)
        answer(found)
        if not found["equal"]:
            raise typer.Exit(1)


@app.callback(invoke_without_command=True)
def _version(version: Annotated[bool, typer.Option("--version", help="Print the version.")] = False) -> None:
    if version:
        typer.echo(f"leafturn {__version__}")
        raise typer.Exit


# --- the same for every command -----------------------------------------------------------------


def _steps() -> Any:
    """The pipeline, loaded by the commands that run its steps; help and a take need not wait for it."""
    from service import pipeline

    return pipeline


@contextmanager
def _answering(as_json: bool) -> Any:
    """Give the outcome to whoever asked, and turn our errors into words and an exit code."""

    def answer(outcome: Outcome) -> None:
        if as_json:
            typer.echo(json.dumps(plain(outcome), ensure_ascii=False, indent=2))
        else:
            for line in wordy.lines(outcome):
                typer.echo(line)

    try:
        yield answer
    except LeafturnError as error:
        _explain(error, as_json)
        raise typer.Exit(error.exit_code) from error
    except BrokenPipeError:
        raise  # whoever read along has gone
    except OSError as error:
        _explain(_of_the_machine(error), as_json)
        raise typer.Exit(Unreachable.exit_code) from error
    except KeyboardInterrupt:
        typer.echo("leafturn: stopped; nothing is half-kept. Run it again to go on", err=True)
        raise typer.Exit(STOPPED) from None


def _of_the_machine(error: OSError) -> Unreachable:
    """What the machine refused: a full disk, a folder that is not ours."""
    where = f"{error.filename}: " if error.filename else ""
    return Unreachable(f"{where}{error.strerror or error}. Mend that and run it again")


@contextmanager
def _store(config: Path | None) -> Any:
    from service import taking

    store = taking.open_store(settings_file.read(config))
    try:
        yield store
    finally:
        store.close()


@contextmanager
def _progress(as_json: bool) -> Any:
    """A bar for long work: a callback of (done, total, what), or nothing where nobody is looking."""
    if as_json or not sys.stderr.isatty():
        yield None
        return
    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task("", total=None)

        def move(done: int, total: int | None, what: str) -> None:
            bar.update(task, completed=done, total=total, description=what)

        yield move


def _explain(error: LeafturnError, as_json: bool) -> None:
    refusals = error.refusals if isinstance(error, BadInput) else ()
    marks = error.marks if isinstance(error, UnsafeText) else ()
    if as_json:
        body = {"error": str(error), "refused": refusals, "marks": marks, "try_again": not error.permanent}
        typer.echo(json.dumps(plain(body), ensure_ascii=False, indent=2))
        return
    typer.echo(f"leafturn: {wordy.shown(str(error))}", err=True)
    for refusal in refusals[:50]:
        line = f"row {refusal.row}, {refusal.field} = {refusal.value!r}: {refusal.remedy}"
        typer.echo(f"  {wordy.shown(line)}", err=True)
    if len(refusals) > 50:
        typer.echo(f"  … and {len(refusals) - 50} more; --json lists them all", err=True)
    for where, word, reason in marks:
        typer.echo(f"  {where}: {word!r}: {reason}", err=True)
