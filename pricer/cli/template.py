"""``pricer template``: empty workbooks that explain themselves."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer


def template(
    folder: Annotated[Path, typer.Argument(metavar="DIR", help="Folder for the two workbooks.", show_default=False)],
) -> None:
    """Write empty, annotated workbooks for your own book."""
    from pricer.cli import console
    from pricer.loader import write_templates

    try:
        written = write_templates(folder)
    except OSError as error:
        console.complain(f"{error.filename or folder}: {error.strerror or error}. Name a folder that can be written.")
        raise typer.Exit(2) from None
    for path in written:
        console.say(f"wrote {path}")
