"""The command line: one file per command, loaded when it is called. Data on stdout, talk on stderr."""

import signal
import sys
from collections.abc import Sequence
from importlib import import_module

import click

from massfingerprint import __version__
from massfingerprint.errors import MassFingerprintError

_COMMANDS = {
    "altimetry": "What a satellite, a mask, gauges or the open ocean see of the true mean rise.",
    "choices": "How far coasts move with the Earth, rotation, water, latitude, coastline: a table.",
    "explain": "Where a number of a study comes from: inputs, formula, factor, citation, checksum.",
    "earth": "Earths: list, compute their Love numbers, compare, export, plot.",
    "kernel": "What a gigatonne lost anywhere does at a coast: ranked, with range, map.",
    "ledger": "A mass record in gigatonnes and millimetres, with rates and errors; published rates.",
    "motions": "Geocentre, J2, pole, length of day of a mass change, beside the observed pole.",
    "sites": "Sea level at named coasts from published mass rates.",
    "stations": "Elastic motion of permanent geodetic stations over their own epochs, with covariance.",
    "study": "A whole study: one file in, a folder of answers out.",
}


class _LazyGroup(click.Group):
    """Commands whose module, and what it imports, is loaded only when they run."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        del ctx
        return sorted(_COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        del ctx
        if cmd_name not in _COMMANDS:
            return None
        return import_module(f"massfingerprint.cli.{cmd_name}").command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        del ctx
        with formatter.section("Commands"):
            formatter.write_dl(sorted(_COMMANDS.items()))


@click.command(cls=_LazyGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="massfingerprint")
def group() -> None:
    """From mass change in gigatonnes to sea level at a coast in millimetres.

    Results are for screening: local datums, surveys and licensed practice decide.
    """


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; return 0 if fine, 1 for input that cannot be used (one line on stderr), 2 for wrong usage."""
    try:
        outcome = group.main(args=arguments, prog_name="massfingerprint", standalone_mode=False)
    except MassFingerprintError as error:
        click.echo(f"massfingerprint: {error}", err=True)
        return 1
    except click.UsageError as error:
        error.show()
        return 2
    except click.exceptions.Abort:
        click.echo("massfingerprint: stopped; nothing was written.", err=True)
        return 130
    return outcome if isinstance(outcome, int) else 0


def entry() -> None:
    """Console entry point."""
    if hasattr(signal, "SIGPIPE"):
        # the reader of a pipe, such as head, may stop early: end quietly, as other commands do
        signal.signal(signal.SIGPIPE, signal.SIG_DFL)
    sys.exit(main())
