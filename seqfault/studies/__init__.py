"""Solutions to engineering answers, as data."""
