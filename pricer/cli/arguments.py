"""Arguments that several commands share."""

from __future__ import annotations

from pathlib import Path
from typing import Annotated

import typer

BookPath = Annotated[
    Path,
    typer.Argument(
        metavar="BOOK", help="The trades: an .xlsx workbook, or a folder of .csv files.", show_default=False
    ),
]
MarketPath = Annotated[
    Path,
    typer.Argument(
        metavar="MARKET", help="Tonight's market: an .xlsx workbook, or a folder of .csv files.", show_default=False
    ),
]
ValuationDate = Annotated[
    str | None,
    typer.Option(
        "--date",
        metavar="YYYY-MM-DD",
        help="Value at this date instead of the snapshot's own.",
        show_default=False,
    ),
]
EveryProblem = Annotated[
    bool, typer.Option("--every-problem", help="Print every problem, not only the first of each kind.")
]
Strict = Annotated[
    bool, typer.Option("--strict", help="Exit with 1 on any warning or error, even if all trades can be priced.")
]
AcceptFailingSurfaces = Annotated[
    bool,
    typer.Option(
        "--accept-failing-surfaces",
        help="Price trades on volatility surfaces that fail their checks, and mark them.",
    ),
]
