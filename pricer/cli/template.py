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
        # An error of the system has a reason and a file; the refusal to overwrite is a whole sentence.
        reason = f"{error.filename or folder}: {error.strerror}. Name a folder that can be written."
        console.complain(reason if error.strerror else str(error))
        raise typer.Exit(2) from None
    for path in written:
        console.say(f"wrote {path}")
