"""Engines: each turns a contract and a market into a value that knows how wrong it may be."""
