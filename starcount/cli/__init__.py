"""The command line: arguments in, one step called, lines out.

The table of commands is static, so that ``--help`` imports no command and nothing a command needs.
Exit status: 0 done, 1 a bug (with its traceback), 2 bad input or usage, 6 checks failed, 130 interrupted.
"""

import sys
from difflib import get_close_matches
from importlib import import_module

import click

from starcount import __version__
from starcount.cli import screen
from starcount.errors import StarcountError

INTERRUPTED = 130

COMMANDS = {
    "check": "Say everything that is wrong with a survey's files, at once.",
    "count": "Count star catalogues into a survey's fields and bins.",
    "predict": "Predict how many stars of which component each field and bin holds.",
    "fit": "Fit the Galaxy's structure to the counts of a survey.",
    "report": "Draw the figures of a run and the page that puts them together.",
    "population": "Show a population: luminosity function, colours, classes, sources.",
    "laws": "List the density laws, their parameters, and the published Galaxies.",
    "demo": "Fit and report an invented survey: truth against recovery.",
}
"""Name -> summary. Each command is the function of the same name in ``starcount/cli/NAME.py``."""


class Commands(click.Group):
    """A group that imports a command when it is called, not when it is listed."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        if name not in COMMANDS:
            return None
        return getattr(import_module(f"starcount.cli.{name}"), name)

    def resolve_command(self, ctx: click.Context, args: list[str]):
        if args[0] not in COMMANDS and not args[0].startswith("-"):
            near = get_close_matches(args[0], COMMANDS, n=1)
            hint = f"did you mean {near[0]!r}?" if near else f"known: {', '.join(COMMANDS)}"
            raise click.UsageError(f"no command called {args[0]!r}; {hint}", ctx)
        return super().resolve_command(ctx, args)

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(__version__, message="starcount %(version)s")
def starcount() -> None:
    """Predict and fit the star counts of a survey's fields, and see where the model fails.

    The whole job on an invented survey: starcount demo. Results go to outputs/RUN/.
    """


def main(argv: list[str] | None = None) -> int:
    """Run one command; return its exit status."""
    argv = sys.argv[1:] if argv is None else argv
    # Known before parsing, since a usage error too must yield its one object on standard output.
    as_json = "--json" in argv
    try:
        return starcount.main(args=argv, prog_name="starcount", standalone_mode=False) or 0
    except click.UsageError as misuse:
        usage = misuse.ctx.get_usage() if misuse.ctx else ""
        return screen.failure(misuse.format_message(), misuse.exit_code, as_json, before=usage)
    except StarcountError as problem:
        return screen.failure(str(problem), problem.exit_status, as_json)
    except click.Abort:
        return screen.failure("interrupted", INTERRUPTED, as_json)
