"""The `ribbon` command: one verb for each thing a person wants from a ribbon file.

Answers go to standard output, notes and progress to standard error. The exit status is 0 when
done, 2 for bad input (one sentence), 3 when the answer could not be certified (what is known is
still written) and 130 when interrupted. Everything heavy is imported inside the verbs, so that
`ribbon --help` answers at once.
"""

from __future__ import annotations

import sys
from collections.abc import Sequence
from typing import Annotated, TextIO

import typer

from ribbon.commands.build import export, new
from ribbon.commands.look import describe, lattices
from ribbon.commands.molecule import molecule
from ribbon.commands.output import ReaderGoneError, emit, hush_stdout, note
from ribbon.commands.study import study
from ribbon.commands.tables import continuum, edges, flux, levels
from ribbon.errors import RibbonError

__all__ = ["app", "main"]

INTERRUPTED = 130

NEXT_STEPS = """\
ribbon: levels, flux response and topology of ribbons closed into rings with half twists

  ribbon new my.toml        write a commented file to start from
  ribbon describe my.toml   what would be built, and what it costs
  ribbon study my.toml      levels, currents, controls and a report in the folder my-study
  ribbon lattices           what is on the shelf

`ribbon --help` lists every command, `ribbon COMMAND --help` its options.
"""

app = typer.Typer(
    name="ribbon",
    rich_markup_mode=None,
    pretty_exceptions_enable=False,
    add_completion=False,
)
for verb in (study, describe, levels, flux, edges, continuum, molecule, export, lattices, new):
    app.command()(verb)


def _version(wanted: bool) -> None:
    if wanted:
        from importlib.metadata import version

        emit(version("halftwist"))
        raise typer.Exit


@app.callback(invoke_without_command=True)
def start(
    context: typer.Context,
    version: Annotated[
        bool, typer.Option("--version", callback=_version, is_eager=True, help="Print the version.")
    ] = False,
) -> None:
    """Levels, edge states and flux response of ribbons closed into rings with half twists."""
    if context.invoked_subcommand is None:
        emit(NEXT_STEPS)


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command and return its exit status; problems become one line on stderr."""
    for stream in (sys.stdout, sys.stderr):
        _accept_all_letters(stream)
    try:
        status = app(args=arguments, prog_name="ribbon", standalone_mode=False)
    except ReaderGoneError:
        return 0
    except RibbonError as problem:
        return _fail(str(problem), problem.exit_status)
    except (KeyboardInterrupt, typer.Abort):
        status = INTERRUPTED
    except MemoryError:
        return _fail("there is not enough memory; `ribbon describe FILE` says how much is needed")
    except OSError as problem:
        place = f"{problem.filename}: " if problem.filename else ""
        return _fail(f"{place}{problem.strerror or problem}")
    except SystemExit:
        # the command library leaves so when the reader of its help text has gone away
        hush_stdout()
        return 0
    except Exception as problem:
        if not hasattr(problem, "format_message"):
            raise
        return _fail(f"{problem.format_message().rstrip('.')} (see `ribbon --help`)")
    return _fail("interrupted", INTERRUPTED) if status == INTERRUPTED else int(status or 0)


def _accept_all_letters(stream: TextIO | None) -> None:
    """Escape what a terminal cannot show, instead of failing on it."""
    reconfigure = getattr(stream, "reconfigure", None)
    if reconfigure is not None:
        reconfigure(errors="backslashreplace")


def _fail(sentence: str, status: int = 2) -> int:
    note("ribbon: " + " ".join(sentence.split()))
    return status


if __name__ == "__main__":
    sys.exit(main())
