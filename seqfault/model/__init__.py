"""Records to per-unit elements, as columns: one array an attribute, one entry a record."""
