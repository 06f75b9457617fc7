"""``pricer eod``: price the whole book and write the report."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Annotated

import typer

from pricer.cli.arguments import BookPath, EveryProblem, MarketPath, ValuationDate


def eod(
    book: BookPath,
    market: MarketPath,
    out: Annotated[
        Path | None,
        typer.Option(
            "--out",
            metavar="DIR",
            help="Folder to write; it must not exist yet. [default: reports/<valuation date>-<book>]",
            show_default=False,
        ),
    ] = None,
    date: ValuationDate = None,
    seed: Annotated[int, typer.Option("--seed", min=0, help="Seed of all random draws.")] = 20_000,
    precision: Annotated[
        float,
        typer.Option(
            "--precision", metavar="BP", help="Standard error asked of each value, in basis points of notional."
        ),
    ] = 1.0,
    workers: Annotated[
        int | None,
        typer.Option("--workers", min=1, help="Trades priced side by side. [default: all cores]", show_default=False),
    ] = None,
    quiet: Annotated[bool, typer.Option("--quiet", help="Print nothing but problems.")] = False,
    every_problem: EveryProblem = False,
) -> None:
    """Price a book at end of day: values, deltas, cross-checks, report."""
    from pricer.cli.inputs import parse_date

    valuation_date = parse_date(date)
    if not precision > 0.0:
        raise typer.BadParameter(f"found {precision:g}; expected a number above 0.", param_hint="--precision")
    if out is not None and out.exists():
        raise typer.BadParameter(
            f"{out} exists; an earlier run is never overwritten. Name another folder.", param_hint="--out"
        )
    target = out if out is not None else Path("reports") / "new"
    if not os.access(next(parent for parent in target.absolute().parents if parent.exists()), os.W_OK):
        raise typer.BadParameter(f"{target.parent} cannot be written. Name another folder.", param_hint="--out")

    from pricer.cli import console
    from pricer.cli.inputs import read_inputs
    from pricer.core.issues import InputError
    from pricer.report import default_folder, write_report
    from pricer.run.pricing import price
    from pricer.run.settings import Settings, available_cores

    try:
        trades, snapshot = read_inputs(book, market, valuation_date)
    except InputError as error:
        console.show_problems(error.issues, every=every_problem)
        raise typer.Exit(2) from None

    settings = Settings(seed=seed, precision_bp=precision, workers=workers or available_cores())
    outcome = price(trades, snapshot, settings, console.progress(quiet=quiet))
    folder = out if out is not None else default_folder(outcome, Path("reports"))
    try:
        written = write_report(outcome, folder)
    except OSError as error:
        console.complain(f"the report could not be written to {folder}: {error}")
        raise typer.Exit(2) from None

    console.show_problems(outcome.issues, every=every_problem)
    if not quiet:
        console.show_outcome(outcome)
        console.say(f"report: {written}")
    raise typer.Exit(outcome.exit_status)
