"""The command line: what people type, what they see, and the exit codes that scripts rely on.

Stays light to import, because `watch` runs for months: whatever reads YAML, computes or draws is imported by the
commands that need it.
"""

from __future__ import annotations

import sys
from pathlib import Path
from typing import TYPE_CHECKING, NoReturn

import click

from watcher import VERSION
from watcher.errors import WatcherError
from watcher.exit_codes import NOT_DONE
from watcher.opening import open_laboratory

if TYPE_CHECKING:
    from collections.abc import Callable

_FILE = click.Path(path_type=Path, dir_okay=False)


def _with_config(command: Callable[..., None]) -> Callable[..., None]:
    return click.option(
        "--config",
        type=_FILE,
        default=Path("config.yaml"),
        show_default=True,
        help="The laboratory's settings.",
    )(command)


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 80})
@click.version_option(VERSION, prog_name="spikewarden")
def main() -> None:
    """Judge standard additions and recoveries while the vials are on the rack.

    Watches a folder for an instrument's text exports, evaluates each one, writes
    result files and mails what fails with what to do next.
    """


@main.command()
@_with_config
def watch(config: Path) -> None:
    """Watch the exports folder until stopped."""
    try:
        with open_laboratory(config, "watch") as laboratory:
            folders = ", ".join(str(folder) for folder in laboratory.settings.exports)
            click.echo(
                f"Watching {folders}; results go to {laboratory.settings.results}. Stop with Ctrl-C.",
                err=True,
            )
            laboratory.service.run()
    except WatcherError as error:
        _give_up(error)


@main.command()
@_with_config
@click.option("--json", "as_json", is_flag=True, help="Print JSON instead of tables.")
def once(config: Path, *, as_json: bool) -> None:
    """Take in what is there, evaluate it, and end.

    Exit 0: all pass. 1: a sample fails or is incomplete. 2: something could not be
    read or done.
    """
    from watcher import account_of_once  # noqa: PLC0415 - see the module's docstring

    try:
        with open_laboratory(config, "once") as laboratory:
            with account_of_once.progress() as told:
                report = laboratory.service.once(told)
            if as_json:
                code = account_of_once.show_json(report, laboratory.ledger)
            else:
                code = account_of_once.show(report, laboratory.settings, laboratory.ledger)
    except WatcherError as error:
        _give_up(error)
    sys.exit(code)


@main.command()
@_with_config
@click.option("--mail", "with_mail", is_flag=True, help="Send a test mail as well.")
def check(config: Path, *, with_mail: bool) -> None:
    """Check settings and layouts; name all faults at once.

    With --mail a test mail goes to everybody whom alerts would reach.

    Exit 0: nothing to find fault with. 2: faults, or the mail was not taken.
    """
    from watcher import inspection, mail_check  # noqa: PLC0415

    code = inspection.check(config)
    sys.exit(code or (mail_check.run(config) if with_mail else code))


@main.command()
@click.argument("export", type=_FILE)
@click.option("--lines", "with_lines", is_flag=True, help="Show the fate of every line.")
@click.option("--json", "as_json", is_flag=True, help="Print JSON instead of tables.")
@_with_config
def explain(export: Path, config: Path, *, with_lines: bool, as_json: bool) -> None:
    """Show how EXPORT is understood and what would come of it; write nothing.

    Exit codes as for once.
    """
    from watcher import inspection  # noqa: PLC0415

    sys.exit(inspection.explain(config, export, with_lines=with_lines, as_json=as_json))


@main.command()
@click.argument("exports", metavar="EXPORT...", nargs=-1, required=True, type=_FILE)
@click.option("--output", type=_FILE, help="Write the layout into this new file.")
def draft(exports: tuple[Path, ...], output: Path | None) -> None:
    """Draft a layout from one or several example exports of one kind.

    What it is not sure of is marked "# unsure:", what only you know "# FILL IN:".
    Behind the layout stands how the examples are read with it.

    Exit 0: drafted, and the examples can be read. 2: the shape is beyond it, an
    example is refused, or the file is there already.
    """
    from watcher import drafting  # noqa: PLC0415

    sys.exit(drafting.run(exports, output))


@main.command()
@_with_config
@click.option("--json", "as_json", is_flag=True, help="Print it as JSON.")
def status(config: Path, *, as_json: bool) -> None:
    """Tell how the service is, and which failures are open.

    Exit 0: well. 1: something needs attention, or a failure is open. 2: it is not
    running.
    """
    from watcher import status as state  # noqa: PLC0415

    sys.exit(state.run(config, as_json=as_json))


@main.command()
@_with_config
@click.option("--analyte", help="Only this analyte.")
@click.option("--since", metavar="MONTH", help="Only from this month on, such as 2026-09.")
@click.option("--limit", "limits", metavar="CHECK=LIMIT", multiple=True, help="Try another limit; may be repeated.")
@click.option("--json", "as_json", is_flag=True, help="Print it as JSON.")
def history(config: Path, analyte: str | None, since: str | None, limits: tuple[str, ...], *, as_json: bool) -> None:
    """Show recoveries, slopes and scatter over the months.

    With --limit "recovery=80 to 120 %" it counts how many series would fail under
    another limit. Reads the records in the results folder and writes nothing.

    Exit 0: shown. 2: settings, a limit or a record cannot be read.
    """
    from watcher import history as past  # noqa: PLC0415

    sys.exit(past.run(config, analyte=analyte, since=since, limits=limits, as_json=as_json))


@main.command()
@click.option("--config", type=_FILE, help="Settings whose records folder takes the record.")
@click.option("--json", "as_json", is_flag=True, help="Print the record as JSON instead of the table.")
def prove(config: Path | None, *, as_json: bool) -> None:
    """Recompute published examples on this machine, with a dated record.

    The record, JSON and text, goes into records/prove, or without --config into the
    current folder.

    Exit 0: all agree. 1: a value disagrees. 2: examples, settings or record cannot
    be read or written.
    """
    from watcher import prove as proof  # noqa: PLC0415

    sys.exit(proof.run(config, Path.cwd(), as_json=as_json))


@main.command()
@click.argument("folder", type=click.Path(path_type=Path, file_okay=False), default=Path("spikewarden-demo"))
def demo(folder: Path) -> None:
    """Run an invented laboratory in FOLDER and show what arrives.

    Writes settings, layouts and exports there, runs the real service on them with a
    mail server of its own on this computer, and shows results and mails.
    """
    from watcher import demo as demonstration  # noqa: PLC0415

    sys.exit(demonstration.run(folder))


def _signed(command: Callable[..., None]) -> Callable[..., None]:
    return click.option("--by", required=True, help="Your name, for the record.")(command)


@main.command()
@_signed
@click.option("--why", required=True, help="The reason, for the record.")
@_with_config
def adopt(config: Path, by: str, why: str) -> None:
    """Put the settings as they are in the files in force.

    Needed where the settings say adoption: signed. Exit 0: done or handed to the
    running service. 2: not done.
    """
    from watcher import records_commands  # noqa: PLC0415

    sys.exit(records_commands.ask(config, "adopt", "", by, why))


@main.command()
@click.argument("export")
@_signed
@click.option("--why", required=True, help="The reason, for the record.")
@_with_config
def again(export: str, config: Path, by: str, why: str) -> None:
    """Evaluate EXPORT anew under the settings in force.

    Exit 0: done or handed to the running service. 2: not done.
    """
    from watcher import records_commands  # noqa: PLC0415

    sys.exit(records_commands.ask(config, "again", export, by, why))


@main.command()
@click.argument("result")
@click.argument("words")
@_signed
@_with_config
def note(result: str, words: str, config: Path, by: str) -> None:
    """Record what was done about RESULT and close its open failures.

    RESULT is the export's name. Exit 0: done or handed to the running service.
    2: not done.
    """
    from watcher import records_commands  # noqa: PLC0415

    sys.exit(records_commands.ask(config, "note", result, by, words))


@main.command()
@click.argument("result", required=False)
@click.option("--all", "everything", is_flag=True, help="Check the whole ledger, all copies and result files.")
@_with_config
def audit(result: str | None, config: Path, *, everything: bool) -> None:
    """Tell the whole story of RESULT, or check --all for alterations.

    The service may run. Exit 0: as recorded. 1: altered or missing. 2: not now.
    """
    from watcher import records_commands  # noqa: PLC0415

    if (result is None) != everything:
        raise click.UsageError("State a result or --all, one of them.")
    sys.exit(records_commands.audit(config, result))


@main.command()
@click.argument("result", required=False)
@click.option("--last", type=click.IntRange(min=1), help="The results that were done last.")
@_with_config
def replay(result: str | None, last: int | None, config: Path) -> None:
    """Compute RESULT again from its copy and the settings of then.

    The service may run. Exit 0: the same to 1e-9. 1: not. 2: not now.
    """
    from watcher import records_commands  # noqa: PLC0415

    if (result is None) == (last is None):
        raise click.UsageError("State a result or --last N, one of them.")
    sys.exit(records_commands.replay(config, result, last or 1))


def _give_up(error: WatcherError) -> NoReturn:
    click.echo(str(error), err=True)
    sys.exit(NOT_DONE)
