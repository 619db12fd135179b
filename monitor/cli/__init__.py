"""The command line: each command in a module of its own, loaded only when called."""

from __future__ import annotations

import importlib
import os
import sys
import traceback

import click

from monitor.core.errors import FieldsillError

COMMANDS = (
    "run", "measure", "serve", "rehearse", "check", "status",
    "limits", "field", "averages", "explain", "ratio", "iq", "calibration",
)  # fmt: skip


class LazyGroup(click.Group):
    """Imports a command's module when the command is asked for."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, name: str) -> click.Command | None:
        if name not in COMMANDS:
            return None
        module = importlib.import_module(f"monitor.cli.{name.replace('-', '_')}")
        command: click.Command = module.command
        return command


@click.group(
    cls=LazyGroup,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"]},
)
@click.version_option(package_name="fieldsill")
@click.pass_context
def group(context: click.Context) -> None:
    """Unattended, logging monitor of radio-frequency exposure."""
    if context.invoked_subcommand is None:
        click.echo(context.get_help())


def main(argv: list[str] | None = None) -> None:
    """Run a command. Exit codes: 0 done, 1 answer is no, 2 wrong input, 3 unreachable, 4 bug."""
    try:
        code = group.main(args=argv, prog_name="fieldsill", standalone_mode=False)
    except FieldsillError as error:
        click.echo(f"fieldsill: {error}", err=True)
        sys.exit(error.exit_code)
    except click.ClickException as error:
        click.echo(f"fieldsill: {' '.join(error.format_message().split())}", err=True)
        sys.exit(2)
    except (click.Abort, KeyboardInterrupt):
        sys.exit(130)
    except BrokenPipeError:
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        sys.exit(0)
    except Exception:  # noqa: BLE001 - the outermost boundary: a bug exits with 4, never with 1
        traceback.print_exc()
        sys.exit(4)
    sys.exit(code if isinstance(code, int) else 0)
