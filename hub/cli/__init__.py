"""The commands: parse, delegate, and turn every complaint into one sentence and an exit code."""

import sys
from pathlib import Path

import click

from hub import __version__
from hub.cli import access, figures, importing, inventory, running, selfcheck
from hub.cli.common import Context
from hub.errors import PackfoldError


@click.group(context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
@click.version_option(__version__, prog_name="packfold")
@click.option(
    "--settings",
    type=click.Path(path_type=Path, dir_okay=False),
    envvar="PACKFOLD_SETTINGS",
    help="Settings file (hub.toml). Without it the defaults and PACKFOLD_SECTION_KEY variables apply.",
)
@click.option(
    "--data",
    type=click.Path(path_type=Path, file_okay=False),
    envvar="PACKFOLD_DATA",
    help="Data folder. Default: the platform's folder for application data.",
)
@click.pass_context
def cli(context: click.Context, settings: Path | None, data: Path | None) -> None:
    """Keep solar-charged NiMH packs alive: store what their nodes send, and say how they are.

    \b
    First steps:
      packfold demo                          a simulated scenario, to look around
      packfold inventory load FILE.toml      your sites, nodes and packs
      packfold credential add NODE           a login for a node at the broker
      packfold user add NAME                 a login for the pages
      packfold run                           receive, compute, show

    Every command explains itself with --help. Exit codes: 0 done, 1 the work failed, 2 wrong use.
    """
    context.obj = Context(settings, data)


for command in (
    running.run,
    running.demo,
    inventory.inventory,
    importing.import_,
    figures.analyse,
    figures.export,
    access.credential,
    access.user,
    selfcheck.selfcheck,
):
    cli.add_command(command)


def main() -> None:
    """Run the command line; a complaint meant for a person is printed as one sentence, never as a traceback."""
    try:
        cli.main(standalone_mode=False)
    except PackfoldError as error:
        click.echo(f"packfold: {error}", err=True)
        sys.exit(error.exit_code)
    except click.exceptions.Exit as stop:
        sys.exit(stop.exit_code)
    except click.Abort:
        click.echo("packfold: stopped.", err=True)
        sys.exit(1)
    except click.ClickException as error:
        error.show()
        sys.exit(2)
    except BrokenPipeError:
        # The reader of our output went away (``packfold export … | head``).
        sys.stderr.close()
        sys.exit(1)
