"""What the table means: growth constants, exponents, next terms. Needs only `series`."""
