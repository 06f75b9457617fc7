"""Ground floor: issues, random streams and progress. Knows no finance."""
