"""The group of commands, its help screen, and what every failure becomes.

Exit status: 0 done; 1 internal fault; 2 usage or input refused; 3 finished, but the checks say that the result should
not be trusted; 130 interrupted.
"""

from __future__ import annotations

import errno
import os
import sys
from collections.abc import Sequence

import click

from reweight.cli.combine import combine
from reweight.cli.crossing import crossing
from reweight.cli.curve import curve
from reweight.cli.demo import demo
from reweight.cli.distribution import distribution
from reweight.cli.draft import draft
from reweight.cli.explain import explain
from reweight.cli.peak import peak
from reweight.cli.runs import runs
from reweight.cli.show import show
from reweight.cli.states import states
from reweight.errors import ReweightError
from reweight.notation import printable
from reweight.version import VERSION

__all__ = ["application", "main"]

CANNOT_PRINT = {errno.ENOSPC, errno.EDQUOT, errno.EFBIG, errno.EIO}  # files say so themselves

SECTIONS = {
    "Bring data in": (
        draft,
        runs,
    ),
    "Combine": (combine,),
    "Ask": (show, curve, peak, crossing, distribution, states),
    "Learn": (demo, explain),
}


class SectionedGroup(click.Group):
    """A group whose help lists commands by what they are for."""

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        """Write one list a section."""
        for title, commands in SECTIONS.items():
            with formatter.section(title):
                formatter.write_dl([(each.name or "", each.get_short_help_str(80)) for each in commands])


@click.group(
    cls=SectionedGroup, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100}
)
@click.version_option(VERSION, prog_name="reweight", message="%(prog)s %(version)s")
@click.option("--debug", is_flag=True, help="Show the traceback of an internal fault.")
def application(debug: bool) -> None:
    """Energies from canonical runs at a few temperatures in; mean energy, heat capacity and its peak at any
    temperature between them out, with error bars.

    New here: reweight demo
    """  # noqa: D205  # click shows this text


for _commands in SECTIONS.values():
    for _command in _commands:
        application.add_command(_command)


def main(arguments: Sequence[str] | None = None) -> None:
    """Run the command line and end the process with its exit status."""
    given = list(sys.argv[1:] if arguments is None else arguments)
    sys.exit(_status(given))


def _status(arguments: list[str]) -> int:
    try:
        status = application.main(arguments, prog_name="reweight", standalone_mode=False)
        sys.stdout.flush()
        return int(status or 0)
    except click.ClickException as error:
        error.show()
        return error.exit_code
    except ReweightError as error:
        _complain(str(error))
        return 2
    except (click.Abort, KeyboardInterrupt):
        _complain("interrupted; no file was left unfinished")
        return 130
    except BrokenPipeError:  # the reader of a pipe has seen enough
        _forget_stdout()
        return 0
    except Exception as error:
        if isinstance(error, OSError) and error.errno in CANNOT_PRINT:
            _forget_stdout()
            _complain(f"the answer cannot be printed; the system says: {error.strerror}. Free some space.")
            return 2
        if "--debug" in arguments:
            raise
        _complain(
            f"internal fault ({type(error).__name__}: {error}). This is a defect of the program; "
            "reweight --debug COMMAND ... shows where."
        )
        return 1


def _complain(text: str) -> None:
    """Say on the error stream what is wrong, on its lines; file names in it may hold anything."""
    click.echo("\n".join(map(printable, f"reweight: {text}".split("\n"))), err=True)


def _forget_stdout() -> None:
    """Let what is still to be printed vanish: the interpreter would try once more at its end."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
