"""Text to validated records: quantities, the tables of the case file, scenarios."""
