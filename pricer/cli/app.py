"""The commands of ``pricer``, one file each. Engines and readers are loaded when a command runs."""

from __future__ import annotations

import typer

from pricer.cli.check import check
from pricer.cli.eod import eod
from pricer.cli.template import template

_EPILOG = (
    "Exit status: 0 all trades priced, 1 some trades not priced, 2 nothing could be done. "
    "Values are model estimates: no advice, and no substitute for independent price verification "
    "and your firm's own approvals."
)

app = typer.Typer(
    name="pricer",
    help="Prices a book of multi-asset options, cross-checks it, and says how wrong each number may be.",
    epilog=_EPILOG,
    no_args_is_help=True,
    add_completion=False,
    rich_markup_mode=None,  # plain help: loading the drawing library would double its time
    pretty_exceptions_enable=False,
)
app.command(epilog=_EPILOG)(eod)
app.command(epilog=_EPILOG)(check)
app.command()(template)


@app.callback(invoke_without_command=True)
def root(
    context: typer.Context,
    version: bool = typer.Option(False, "--version", help="Show the version and stop.", is_eager=True),
) -> None:
    """Prices a book of multi-asset options, cross-checks it, and says how wrong each number may be."""
    if version:
        from importlib.metadata import version as version_of

        typer.echo(f"pricer {version_of('pricer')}")
        raise typer.Exit
    if context.invoked_subcommand is None:
        typer.echo(context.get_help())
