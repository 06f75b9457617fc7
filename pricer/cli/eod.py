"""``pricer eod``: price the whole book and write the report."""

from __future__ import annotations

import os
from pathlib import Path
from typing import Annotated

import typer

from pricer.cli.arguments import AcceptFailingSurfaces, BookPath, EveryProblem, MarketPath, Strict, ValuationDate


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
    model: Annotated[
        str | None,
        typer.Option(
            "--model",
            metavar="MODEL",
            help="Model of trades that ask for none: lognormal, or local volatility. [default: local volatility "
            "where an underlying has a smile]",
            show_default=False,
        ),
    ] = None,
    compare_models: Annotated[
        bool,
        typer.Option("--compare-models/--one-model", help="Value trades under both models and show the difference."),
    ] = True,
    accept_failing_surfaces: AcceptFailingSurfaces = False,
    towards_one: Annotated[
        float,
        typer.Option(
            "--correlation-towards-one",
            metavar="SHARE",
            min=0.0,
            max=1.0,
            help="Move all correlations among underlyings by this share of the way to 1; those with exchange "
            "rates shrink.",
        ),
    ] = 0.0,
    towards_zero: Annotated[
        float,
        typer.Option("--correlation-towards-zero", metavar="SHARE", min=0.0, max=1.0, help="The same towards 0."),
    ] = 0.0,
    digital_spread: Annotated[
        float,
        typer.Option(
            "--digital-spread",
            metavar="SHARE",
            min=0.0,
            max=0.5,
            help="Show what it costs to book jumps of payoffs as spreads of this width, a share of the level.",
        ),
    ] = 0.0,
    barrier_shift: Annotated[
        float,
        typer.Option(
            "--barrier-shift",
            metavar="SHARE",
            min=0.0,
            max=0.5,
            help="Show what it costs to book barriers and triggers moved by this share to the desk's safe side.",
        ),
    ] = 0.0,
    workers: Annotated[
        int | None,
        typer.Option("--workers", min=1, help="Trades priced side by side. [default: all cores]", show_default=False),
    ] = None,
    strict: Strict = False,
    quiet: Annotated[bool, typer.Option("--quiet", help="Print nothing but problems.")] = False,
    every_problem: EveryProblem = False,
) -> None:
    """Price a book at end of day: values, deltas, cross-checks, report."""
    from pricer.cli.inputs import parse_date, parse_model

    valuation_date, asked_model = parse_date(date), parse_model(model)
    if towards_one > 0.0 and towards_zero > 0.0:
        raise typer.BadParameter(
            "found a share towards one and one towards zero; expected one of them.",
            param_hint="--correlation-towards-one",
        )
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
    from pricer.cli.inputs import read_inputs, strict_status
    from pricer.contracts.overhedge import Overhedge
    from pricer.core.issues import InputError
    from pricer.report import default_folder, write_report
    from pricer.run.pricing import price
    from pricer.run.settings import Settings, available_cores

    try:
        trades, snapshot = read_inputs(book, market, valuation_date)
    except InputError as error:
        console.show_problems(error.issues, every=every_problem)
        raise typer.Exit(2) from None

    settings = Settings(
        seed=seed,
        precision_bp=precision,
        workers=workers or available_cores(),
        model=asked_model,
        compare_models=compare_models,
        accept_failing_surfaces=accept_failing_surfaces,
        correlation_towards_one=towards_one,
        correlation_towards_zero=towards_zero,
        overhedge=Overhedge(digital_spread, barrier_shift) if max(digital_spread, barrier_shift) > 0.0 else None,
    )
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
    raise typer.Exit(strict_status(outcome.exit_status, outcome.issues) if strict else outcome.exit_status)
