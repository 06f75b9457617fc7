"""The words of the report that explain its numbers."""

from __future__ import annotations

from pricer.core.issues import Severity
from pricer.report.verdicts import NO_SAMPLING
from pricer.run.outcome import Interval, Status, Verdict

CAUTION = (
    "Model values are estimates. They are not advice and not an offer, and they are no substitute for independent "
    "price verification, the firm's own model approval, the accounting and prudential rules where it operates, and "
    "the sign-off of people authorised to give it."
)

READING: tuple[tuple[str, str], ...] = (
    ("totals", "Sums over the trades that have a value. Trades that were not priced are left out, counted and listed."),
    (
        "standard errors of totals",
        "Every trade is sampled with draws of its own, so standard errors are added in quadrature (the root of the sum "
        "of squares).",
    ),
    (
        "sums over underlyings",
        "No standard error is shown for sums over several underlyings: one trade's sensitivities come from the same "
        "draws, so their errors do not add in quadrature. Sums over trades for one underlying do.",
    ),
    (
        "99 % sampling interval",
        "The total less and plus a Student quantile of standard errors, the degrees of freedom of the trades pooled "
        "(2.58 in a large book). It covers the sampling error alone: not the model, not the market data, not trades "
        "left out.",
    ),
    (
        "values without sampling",
        "Closed forms and quadratures have a numerical error instead of a sampling error: half the distance between "
        "lower and upper end. These are added up, without any netting, in a line of their own, together with what "
        "certified bounds leave open beyond the sampling error of the value between them.",
    ),
    ("signs", "The desk's: a positive value is worth having, a positive delta gains when the price rises."),
    ("lots", "Delta over the underlying's lot size, not rounded."),
    ("1 vol point", "0.01 of annual volatility: from 20 % to 21 %."),
    (
        "model difference",
        "Value under local volatility less value under lognormal levels with at-the-forward volatilities, whichever "
        "leads. Both use the same market; the difference is what the smile is worth to the trade, as far as either "
        "model tells. Totals leave out trades that were valued under one model only.",
    ),
    (
        "target of 0.05 vol points",
        "Asked of the simulated model on every quoted vanilla whose call has a forward delta of 10 to 90 %.",
    ),
    (
        "derived points",
        "Where the market quotes a level, a skew and a curvature instead of strikes, what these mean one standard "
        "deviation to either side of the forward is repriced too, and not counted as quotes.",
    ),
    (
        "mean of simulated less fitted",
        "In standard errors of the simulated volatilities, over all points. Points of one underlying share their "
        "draws, so chance moves the mean by about one over the root of the number of underlyings; what is more is a "
        "bias, most likely of the time steps.",
    ),
    (
        "checked, under its model, by",
        "A cross-check tests the engine under the model it was made for. Most closed forms and bounds are of lognormal "
        "levels: beside a value under local volatility they test the sampling, not that value. The column says which "
        "reference of the leading model stands beside the value; in the summary, otherwise means by bounds or by an "
        "independent sample.",
    ),
    (
        "values that nothing has to check",
        "Of a trade that has ended only decided amounts are left, which are discounted: no reference stands beside "
        "them, and they do not count as unchecked.",
    ),
    (
        "probabilities and expected lives",
        "Under the pricing measure of the leading model: they explain the value, and are no forecast.",
    ),
    (
        "overhedge cost",
        "Value of what the desk would book for safety less the value shown: jumps of payouts and coupons as spreads on "
        "the safe side, barriers and call triggers moved; where the safe direction is not known the worse one counts. "
        "Common practice; it is not inside the value, and whether it may be is for the local rules to decide. Both are "
        "sampled, so a cost of the size of the standard error says little.",
    ),
    (
        "events",
        "Distances are from today's level of what a trigger compares to its level; standard deviations use today's "
        "volatilities and correlations without drift, to first order. They rank triggers and are no probabilities.",
    ),
    ("1 bp of notional", "0.01 % of the trade's notional."),
    (
        "reporting currency",
        "Converted at the snapshot's spot rates. The summary shows the largest groups, and one line for the rest.",
    ),
    ("blank cell", "The number does not exist for this row, or could not be formed from what is known."),
    (
        "marked rows",
        "Orange tint with a bold word: look at it. Grey with slanted figures: the trade has no value. Columns right "
        "of the print area are for the screen.",
    ),
)

INTERVALS: dict[Interval, str] = {
    Interval.EXACT: "Closed form or quadrature; the ends are the value less and plus its numerical error.",
    Interval.BOUNDS: "Bounds computed without sampling, both nearer than the ends of the sampling interval.",
    Interval.CERTIFIED: "A lower and an upper bound of an early exercise, both sampled, each moved out by its own 99 % "
    "error: no exercise rule is worth less than the one below, and none can be worth more than the one above.",
    Interval.SAMPLING: "Two-sided 99 % interval by Student's quantile, cut at a bound if one is nearer.",
}

STATUSES: dict[Status, str] = {
    Status.PRICED: "The value is as precise as asked; its deltas' errors stand beside them.",
    Status.PRECISION_NOT_REACHED: "Priced, but the value less precisely than asked: read its standard error.",
    Status.DISPUTED: "Priced, but a cross-check of the trade, under either model, disagrees: find out why before using "
    "the number. Without it, nothing that was compared disagrees; whether anything was, stands under checked.",
    Status.FAILING_SURFACE: "Priced because the user asked for it, from a volatility surface that fails its checks: "
    "the sheet Market says which and why. It comes before disputed and precision not reached.",
    Status.NOT_PRICED: "No value; Valuations has the reason, short in place of the method and in full at the end.",
}

VERDICTS: dict[str, str] = {
    Verdict.DIFFERS: "Engine and reference, exact or an independent sample, differ by more than the tolerance: find "
    "out why before using either.",
    Verdict.OUTSIDE_BOUND: "The engine's value lies beyond a bound by more than the tolerance: find out why.",
    Verdict.AGREES: "Engine and reference, exact or an independent sample, agree within the tolerance.",
    NO_SAMPLING: "Verdict “agrees” where the engine left nothing to sampling either: no test of the sampling.",
    Verdict.WITHIN_BOUND: "The engine's value respects the bound within the tolerance.",
    Verdict.FAR: "An approximation is far from the engine's value; that by itself says nothing against the engine.",
    Verdict.CLOSE: "An approximation lies close to the engine's value.",
}

SEVERITIES: dict[Severity, str] = {
    Severity.FATAL: "The file or the market could not be used at all.",
    Severity.ERROR: "One trade, or one market item, could not be used.",
    Severity.WARNING: "Used, but a person should look.",
}
