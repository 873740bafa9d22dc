"""The command tree, and the one place where an error becomes an exit code."""

from __future__ import annotations

import sys

import click

from identify import __version__
from identify.cli.compare import compare
from identify.cli.confirm import confirm, instrument
from identify.cli.demo import demo
from identify.cli.library import library
from identify.cli.library_audit import audit, export
from identify.cli.library_calibrate import calibrate
from identify.cli.library_care import (
    affected,
    backup,
    consensus,
    migrate,
    quarantine,
    reinstate,
    restore,
    verify,
)
from identify.cli.library_proof import check_signed, create_key, sign
from identify.cli.run import run
from identify.cli.search import search
from identify.cli.serve import serve
from identify.cli.standard import standard
from identify.errors import FetchError, InputError, IonwitnessError, LibraryError, StructureError, UsageError

EXIT_CODES: tuple[tuple[type[IonwitnessError], int], ...] = (
    (UsageError, 2),
    (InputError, 3),
    (StructureError, 3),
    (LibraryError, 4),
    (FetchError, 4),
)
EXIT_BUG = 70


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="ionwitness")
def ionwitness() -> None:
    """Put defensible names to unknown electron-ionization mass spectra.

    A name given by software is a proposal: a tentative identification is no confirmation. Local codes, accredited
    methods and licensed practice decide what may be reported.

    \b
    Exit codes: 0 done · 1 done, some inputs rejected · 2 usage or settings · 3 no input could be read
                4 library problem · 70 a bug
    """


for _command in (demo, search, run, confirm, instrument, compare, standard, library, serve):
    ionwitness.add_command(_command)
for _command in (
    audit,
    export,
    verify,
    backup,
    restore,
    migrate,
    quarantine,
    reinstate,
    affected,
    consensus,
    calibrate,
):
    library.add_command(_command)
for _command in (create_key, sign, check_signed):
    library.add_command(_command)


def main() -> None:
    """Run the command line and leave with the exit code the outcome deserves."""
    try:
        code = ionwitness.main(prog_name="ionwitness", standalone_mode=False)
    except click.exceptions.Abort:
        click.echo("Stopped.", err=True)
        code = 130
    except click.ClickException as error:
        error.show()
        code = 2
    except IonwitnessError as error:
        click.echo(f"ionwitness: {error}", err=True)
        code = next((code for kind, code in EXIT_CODES if isinstance(error, kind)), EXIT_BUG)
    except BrokenPipeError:
        sys.stderr.close()
        code = 0
    except Exception:
        import traceback

        traceback.print_exc()
        click.echo("ionwitness: this is a bug. Please report it with the lines above.", err=True)
        code = EXIT_BUG
    sys.exit(code if isinstance(code, int) else 0)
