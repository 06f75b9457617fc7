"""The columns of the market's tables."""

from __future__ import annotations

from pricer.report.columns import Column, Kind, text_column

_UNDERLYING = text_column("underlying", "underlying", "The underlying's id in the market snapshot.", 18)
_EXPIRY = Column("expiry_date", "expiry", Kind.DATE, "The expiry that is quoted.")

MARKET_PROBLEMS: tuple[Column, ...] = (
    text_column("kind", "kind of problem", "What was wrong, in two or three words.", 34),
    text_column("table", "table", "The table of the market in which it was found.", 18),
    Column("severity", "severity", Kind.STATUS, "As on the sheet Problems."),
    Column("number", "places (number)", Kind.COUNT, "Places at which it was found; the sheet Problems has every one."),
    Column("place", "first place", Kind.PROSE, "Where it was found first."),
    Column("found", "found there", Kind.PROSE, "What stands at the first place."),
    Column("mend", "what was done, or how to mend it", Kind.PROSE, "For the first place.", widest=56),
)

LACKING: tuple[Column, ...] = (
    text_column("kind", "kind", "What is wrong, in a few words.", 34),
    Column("trades", "trades (number)", Kind.COUNT, "Trades of the book that have no price because of it."),
    text_column("first_trade", "first trade", "The first of them.", 18),
    Column("found", "found", Kind.PROSE, "What was found."),
    Column("mend", "how to mend it", Kind.PROSE, "What to do."),
)

SURFACES: tuple[Column, ...] = (
    _UNDERLYING,
    Column(
        "verdict",
        "verdict",
        Kind.STATUS,
        "Fails: its quotes contradict each other, the fitted surface has arbitrage, or a quote is missed widely. "
        "Trades are priced from it only where the user asked for that, and then marked. Cannot be used: the underlying "
        "lacks something, or something of it was refused. Misses target: it passes, but "
        "a quote between 10 and 90 delta is missed by more than 0.05 vol points. No smile: volatilities at the forward "
        "alone, which every model gives back.",
        widest=14,
    ),
    Column("trades", "trades (number)", Kind.COUNT, "Trades of the book that depend on the underlying."),
    Column(
        "trades_refused",
        "not priced because of it (number)",
        Kind.COUNT,
        "Those of them that have no price because of it, perhaps for other reasons too.",
    ),
    Column("expiries", "expiries (number)", Kind.COUNT, "Expiries that are quoted."),
    Column("quotes", "quotes (number)", Kind.COUNT, "Volatilities that are quoted."),
    Column(
        "derived",
        "derived points (number)",
        Kind.COUNT,
        "What quoted skews and curvatures mean one standard deviation to either side of the forward; no quotes, but "
        "judged like them.",
    ),
    Column("violations", "violations (number)", Kind.COUNT, "Violations of arbitrage by quotes and fitted surface."),
    Column(
        "worst_fit_error_middle_vol_points",
        "worst fit error, 10 to 90 delta (vol points)",
        Kind.FINE,
        "Largest absolute difference of fitted and quoted volatility among the quotes between 10 and 90 delta.",
    ),
    Column(
        "worst_simulated_error_middle_vol_points",
        "worst simulated error, 10 to 90 delta (vol points)",
        Kind.FINE,
        "The same of the volatility implied from the paths that trades are valued on; blank where not simulated.",
    ),
    Column(
        "fit_beyond_target",
        "fit errors beyond 0.05 (number)",
        Kind.COUNT,
        "Quotes between 10 and 90 delta whose fit error is larger than 0.05 vol points.",
    ),
    Column(
        "beyond_target",
        "simulated errors beyond 0.05 (number)",
        Kind.COUNT,
        "Quotes between 10 and 90 delta whose simulated error is larger than 0.05 vol points.",
    ),
    Column(
        "worst_fit_error_wings_vol_points",
        "worst fit error outside (vol points)",
        Kind.FINE,
        "Among the quotes outside 10 to 90 delta, where no target applies.",
    ),
    Column(
        "worst_simulated_error_wings_vol_points",
        "worst simulated error outside (vol points)",
        Kind.FINE,
        "Among the quotes outside 10 to 90 delta.",
    ),
    Column("why", "why it fails or cannot be used, or its first violation", Kind.PROSE, "In words.", widest=56),
)

VIOLATIONS: tuple[Column, ...] = (
    _UNDERLYING,
    Column("violation", "violation: kind, expiry, strike and size", Kind.PROSE, "In words."),
)

CALIBRATION: tuple[Column, ...] = (
    _UNDERLYING,
    _EXPIRY,
    text_column(
        "origin",
        "origin",
        "A quote of the market, or a point derived from a quoted skew and curvature, which is not counted as a quote.",
        9,
    ),
    Column("strike", "strike (underlying's currency)", Kind.AMOUNT, "The strike."),
    Column("strike_percent_of_forward", "strike (% of forward)", Kind.FIXED, "The strike over the forward."),
    Column("delta_percent", "delta of the call (%)", Kind.FIXED, "Forward delta of the call at the quoted volatility."),
    Column(
        "quoted_volatility_percent",
        "quoted volatility (%)",
        Kind.FIXED,
        "As the market snapshot has it, or as its parameters mean it.",
    ),
    Column("fitted_volatility_percent", "fitted volatility (%)", Kind.FIXED, "What the fitted surface says."),
    Column("fit_error_vol_points", "fit error (vol points)", Kind.FINE, "Fitted less quoted volatility."),
    Column(
        "simulated_volatility_percent",
        "simulated volatility (%)",
        Kind.FIXED,
        "Implied from the vanilla's price on the paths that trades are valued on; blank where not simulated.",
    ),
    Column(
        "simulated_error_vol_points",
        "simulated error (vol points)",
        Kind.FINE,
        "Simulated less quoted volatility: fit, scheme and sampling together.",
    ),
    Column(
        "simulated_standard_error_vol_points",
        "standard error of simulation (vol points)",
        Kind.FINE,
        "Of the simulated volatility: sampling, and the bias that the time steps leave, together.",
    ),
    Column(
        "target",
        "target of 0.05 vol points",
        Kind.STATUS,
        "Whether the simulated error is at most 0.05 vol points; asked of quotes between 10 and 90 delta.",
    ),
)

CURVES: tuple[Column, ...] = (
    text_column("curve", "curve", "The curve's id in the market snapshot.", 22),
    text_column("currency", "currency", "The currency it discounts.", 10),
    text_column("collateral", "collateral", "The collateral it is for; blank for the standard curve.", 16),
    Column("date", "date", Kind.DATE, "A date of the curve."),
    Column("zero_rate_percent", "zero rate (%)", Kind.FINE, "Continuously compounded rate a year, from today."),
    Column("discount_factor", "discount factor (per unit)", Kind.FACTOR, "Value today of one unit paid on the date."),
    text_column("instrument", "instrument", "The quote that the point was made from, if it was.", 24),
    Column("quoted_rate_percent", "quoted rate (%)", Kind.FINE, "As the market snapshot has it."),
    Column("repriced_rate_percent", "repriced rate (%)", Kind.FINE, "The same instrument on the finished curve."),
    Column("repricing_difference_bp", "repriced less quoted (bp)", Kind.FINE, "0.01 bp or more is marked."),
)

FORWARDS: tuple[Column, ...] = (
    _UNDERLYING,
    Column("date", "date", Kind.DATE, "An ex date or an expiry."),
    Column("forward", "forward (underlying's currency)", Kind.FINE, "After that day's dividends."),
    Column(
        "dividend",
        "dividend (underlying's currency)",
        Kind.FINE,
        "Cash or proportional amount of that ex date; 0 on other dates.",
    ),
    Column(
        "floor",
        "floor (underlying's currency)",
        Kind.FINE,
        "Value on that date of the cash dividends still to come, below which the price cannot fall.",
    ),
    Column(
        "simulated_forward",
        "simulated forward (underlying's currency)",
        Kind.FINE,
        "Of the paths that trades are valued on; blank where not simulated.",
    ),
    Column("simulated_error_bp", "simulated less forward (bp of forward)", Kind.FINE, "0.01 % of the forward is 1 bp."),
    Column("simulated_standard_error_bp", "sampling error (bp of forward)", Kind.FINE, "One standard error."),
    Column(
        "simulated_error_standard_errors",
        "simulated less forward (standard errors)",
        Kind.FIXED,
        "More than 5, and at least 0.01 bp, is marked.",
    ),
)

CREDIT: tuple[Column, ...] = (
    text_column("name", "name", "The name in the market snapshot.", 26),
    Column("date", "date", Kind.DATE, "A date of the name's curve."),
    Column("recovery_percent", "recovery (%)", Kind.FIXED, "Of the claim."),
    Column("hazard_rate_percent", "hazard rate (% a year)", Kind.FINE, "Up to the date, from the one before."),
    Column("survival_probability_percent", "survival (%)", Kind.FINE, "Probability of survival to the date."),
)

FUNDING: tuple[Column, ...] = (
    Column("date", "date", Kind.DATE, "A date of the desk's funding curve."),
    Column("borrowing_spread_bp", "borrowing spread (bp)", Kind.FIXED, "Zero spread of unsecured borrowing."),
    Column("lending_spread_bp", "lending spread (bp)", Kind.FIXED, "Zero spread of cash placed."),
)

AGREEMENTS: tuple[Column, ...] = (
    text_column("netting_set", "netting set", "Its id in the market snapshot.", 20),
    text_column("counterparty", "counterparty", "Who signed it.", 26),
    text_column("currency", "currency", "The currency of its amounts.", 9),
    text_column("collateral", "collateral", "Who posts variation collateral.", 24),
    Column(
        "counterparty_threshold",
        "counterparty's threshold (its currency)",
        Kind.AMOUNT,
        "Exposure of the desk that stays uncovered.",
    ),
    Column("desk_threshold", "desk's threshold (its currency)", Kind.AMOUNT, "The counterparty's exposure likewise."),
    Column("minimum_transfer_amount", "minimum transfer (its currency)", Kind.AMOUNT, "Smaller calls are not made."),
    Column(
        "independent_amount",
        "independent amount (its currency)",
        Kind.AMOUNT,
        "Held by the desk whatever the exposure; negative where the desk posts it.",
    ),
    Column(
        "collateral_spread_bp",
        "spread on collateral (bp)",
        Kind.FIXED,
        "What collateral earns above the standard curve.",
    ),
    Column(
        "margin_period_days",
        "margin period (business days)",
        Kind.COUNT,
        "From the last collateral received to the close-out.",
    ),
    text_column("close_out", "close-out", "What the claim of a close-out is measured by.", 20),
)
