"""``pricer check``: validate a book against a market, price nothing."""

from __future__ import annotations

import typer

from pricer.cli.arguments import AcceptFailingSurfaces, BookPath, EveryProblem, MarketPath, Strict, ValuationDate


def check(
    book: BookPath,
    market: MarketPath,
    date: ValuationDate = None,
    accept_failing_surfaces: AcceptFailingSurfaces = False,
    strict: Strict = False,
    every_problem: EveryProblem = False,
) -> None:
    """List every problem of a book and a market, and the market's forwards and volatilities; price nothing."""
    from pricer.cli import console
    from pricer.cli.inputs import parse_date, read_inputs, strict_status
    from pricer.core.issues import InputError
    from pricer.run.admission import admit
    from pricer.run.market_outline import outline

    try:
        trades, snapshot = read_inputs(book, market, parse_date(date))
        admitted = admit(trades, snapshot, accept_failing_surfaces=accept_failing_surfaces)
    except InputError as error:
        console.show_problems(error.issues, every=every_problem)
        raise typer.Exit(2) from None
    console.show_problems(admitted.issues, every=every_problem)
    console.show_market(outline(snapshot))
    ready, refused = len(admitted.trades), len(admitted.refusals)
    console.say(f"{ready} trade{'s' if ready != 1 else ''} can be priced, {refused} cannot.")
    status = 2 if not ready else 1 if refused else 0
    raise typer.Exit(strict_status(status, admitted.issues) if strict else status)
