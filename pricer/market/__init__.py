"""Tonight's market: curves, dividends, volatilities, correlations and currencies, checked once."""
