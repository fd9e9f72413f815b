"""Pure functions of numbers and arrays, each with its published source."""
