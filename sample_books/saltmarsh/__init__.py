"""The Saltmarsh desk: an invented book and market. Every name and figure in it is invented."""
