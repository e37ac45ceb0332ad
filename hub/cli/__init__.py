"""The commands: parse, delegate, and turn every complaint into one sentence and an exit code."""

import importlib
import os
import sys
from pathlib import Path

import click

from hub import __version__
from hub.cli.common import Context
from hub.errors import PackfoldError

# Where each command is. A module is imported when its command is asked for: none waits for another's libraries.
COMMANDS = {
    "run": "running:run",
    "demo": "running:demo",
    "inventory": "inventory:inventory",
    "import": "importing:import_",
    "analyse": "figures:analyse",
    "export": "figures:export",
    "credential": "access:credential",
    "user": "access:user",
    "selfcheck": "checking:selfcheck",
}


class Commands(click.Group):
    """The group of all commands, in the order in which a new keeper meets them."""

    def list_commands(self, ctx: click.Context) -> list[str]:  # noqa: ARG002 - click's signature
        """Names of the commands."""
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:  # noqa: ARG002 - click's signature
        """The command of a name, imported now."""
        if cmd_name not in COMMANDS:
            return None
        module, name = COMMANDS[cmd_name].split(":")
        command: click.Command = getattr(importlib.import_module(f"hub.cli.{module}"), name)
        return command


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 100})
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
    """  # noqa: D301 - click's mark
    context.obj = Context(settings, data)


def main() -> None:
    """Run the command line; a complaint meant for a person is printed as one sentence, never as a traceback."""
    try:
        status = cli.main(standalone_mode=False)
    except PackfoldError as error:
        click.echo(f"packfold: {error}", err=True)
        sys.exit(error.exit_code)
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
    except Exception as error:
        if os.environ.get("PACKFOLD_TRACE"):
            raise
        click.echo(
            f"packfold: something unexpected happened ({type(error).__name__}: {error}). This is a fault in Packfold, "
            "not yours; what was stored is safe. Run it again with PACKFOLD_TRACE=1 to see where, and report it.",
            err=True,
        )
        sys.exit(1)
    sys.exit(status if isinstance(status, int) else 0)
