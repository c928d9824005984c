"""The `weldbasis` command and its parts, each loaded only when it is called."""

from __future__ import annotations

import sys
from collections.abc import Mapping
from importlib import import_module

import click

from weldbasis import __version__
from weldbasis.problem import Refused

COMMANDS: Mapping[str, str] = {
    "start": "a new project folder, with comments that teach",
    "vet": "is the rule set sound: schema, graph, units, gaps, directions, cases",
    "decide": "evaluate a project, write its record, print the joint table",
    "why": "the trace of one joint, in the terminal",
    "levers": "how close a joint is to tipping, and what would relax it",
    "show": "one rule in words, with its table",
    "impact": "what a change from one rule set to another does to projects",
    "freeze": "release the rule set: one file with a digest, signed if you like",
    "replay": "recompute a record and compare, byte by byte",
    "publish": "the static site of one or more projects",
}


class LazyCommands(click.Group):
    """A group that imports a command's module only when that command is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        """All command names in the order of the work."""
        del ctx
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        """The command, or none where there is no such name."""
        del ctx
        if cmd_name not in COMMANDS:
            return None
        module = import_module(f"weldbasis.cli.{cmd_name}")
        command = module.command
        assert isinstance(command, click.Command)
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """List the commands with their one-line purposes, without importing them."""
        del ctx
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.command(cls=LazyCommands, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, message="%(prog)s %(version)s")
def group() -> None:
    """The basis of every welding decision, written down.

    Rules of weldability are kept as data with their sources. The engine evaluates them for the joints of a
    project and says, joint by joint, what is decided and exactly why.

    A first walk:

    \b
      weldbasis start bridge             a project folder to fill in
      weldbasis decide bridge            the decisions, and the record
      weldbasis why bridge J1            the reasons of one joint
      weldbasis publish bridge --to out  the same as a site to read offline

    Exit codes: 0 done, 1 findings that stop work, 2 bad input.

    Decisions support qualified judgement; the contract's code, the qualified procedure and the responsible
    welding coordinator (ISO 14731) take precedence. Verify on the job.
    """


def main() -> None:
    """Run the command; bad input ends with its problems on the error stream and exit code 2, never a traceback."""
    try:
        code = group.main(standalone_mode=False)
        sys.exit(code if isinstance(code, int) else 0)
    except Refused as refused:
        for problem in refused.problems:
            click.echo(str(problem), err=True)
        count = len(refused.problems)
        click.echo(f"{count} problem{'s' if count != 1 else ''}; nothing was written.", err=True)
        sys.exit(2)
    except click.ClickException as fault:
        fault.show()
        sys.exit(2)
    except click.Abort:
        click.echo("stopped", err=True)
        sys.exit(2)
    except BrokenPipeError:
        sys.exit(0)
    except OSError as fault:
        click.echo(f"{fault.filename or 'file'}: {fault.strerror or fault}", err=True)
        sys.exit(2)


if __name__ == "__main__":
    main()
