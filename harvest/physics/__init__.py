"""The equations, one file a subject: pure functions on arrays in SI units."""
